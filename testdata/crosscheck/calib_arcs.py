"""Least squares of the arcs, worked by scipy and numpy. Input as JSON on argv.

lines X VALUE VARIANCE START: scipy.optimize.curve_fit of a constant and
Gaussians integrated over pixels; prints the parameters (constant, then flux, centre,
sigma of each) and their covariance, absolute.
gls ROWS VALUES ERR2 LINE EXTRA LINEVAR PRIOR_ROWS PRIOR_VALUES PRIOR_DEV: generalized
least squares with the whole covariance matrix written out (numpy); prints the
parameters and their covariance.
"""
import json
import sys

import numpy as np
from scipy.optimize import curve_fit
from scipy.special import ndtr

arguments = [np.array(json.loads(a)) for a in sys.argv[2:]]


def lines(x, value, variance, start):
    def model(x, *p):
        y = p[0]
        for flux, centre, sigma in zip(p[1::3], p[2::3], p[3::3]):
            y = y + flux * (ndtr((x + 0.5 - centre) / sigma) - ndtr((x - 0.5 - centre) / sigma))
        return y

    return curve_fit(model, x, value, start, np.sqrt(variance), absolute_sigma=True, xtol=1e-13, ftol=1e-13)


def gls(rows, values, err2, line, extra, line_var, prior_rows, prior_values, prior_dev):
    covariance = np.diag(err2 + extra) + line_var * (line[:, None] == line[None, :])
    inverse = np.linalg.inv(covariance)
    weight = np.diag(1 / prior_dev**2)
    normal = rows.T @ inverse @ rows + prior_rows.T @ weight @ prior_rows
    right = rows.T @ inverse @ values + prior_rows.T @ weight @ prior_values
    return np.linalg.solve(normal, right), np.linalg.inv(normal)


p, cov = {"lines": lines, "gls": gls}[sys.argv[1]](*arguments)
print(json.dumps({"P": list(p), "Cov": [list(row) for row in cov]}))
