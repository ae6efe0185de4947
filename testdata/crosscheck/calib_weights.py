"""Weights of eight nodes 0..7 at f = 0, 1/8, ... 7, as JSON rows.

lagrange: scipy.interpolate.BarycentricInterpolator of the unit vectors.
least-squares FWHM DEGREE: minimise the integral of
|sum_k L_k e^{iwk} - e^{iwf}|^2 e^{-s^2 w^2}/w^2 over w, keeping polynomials up to
DEGREE exact: numpy's QR in the null space (SVD) of the constraints.
"""
import json
import sys

import numpy as np
from scipy.interpolate import BarycentricInterpolator
from scipy.linalg import null_space

nodes = np.arange(8.0)
places = np.arange(57) / 8


def lagrange():
    return BarycentricInterpolator(nodes, np.eye(8))(places)


def least_squares(fwhm, degree):
    sigma = fwhm / np.sqrt(8 * np.log(2))
    x, weight = np.polynomial.legendre.leggauss(300)
    w = 3 * (x + 1)  # 0..6 per pixel; e^{-s^2 36} = 5e-26 of the peak
    root = np.sqrt(weight) * np.exp(-(sigma * w) ** 2 / 2) / w
    rows = []
    for f in places:
        powers = np.array([(nodes - f) ** d for d in range(degree + 1)])
        target = np.zeros(degree + 1)
        target[0] = 1
        start = np.linalg.lstsq(powers, target, rcond=None)[0]
        free = null_space(powers)
        a = root[:, None] * np.exp(1j * w[:, None] * (nodes - f))
        miss = root - a @ start
        a = a @ free
        q, r = np.linalg.qr(np.vstack([a.real, a.imag]))
        c = np.linalg.solve(r, q.T @ np.concatenate([miss.real, miss.imag]))
        rows.append(start + free @ c)
    return np.array(rows)


if sys.argv[1] == "lagrange":
    out = lagrange()
else:
    out = least_squares(float(sys.argv[2]), int(sys.argv[3]))
print(json.dumps(out.tolist()))
