"""What a mirror gets of a source behind the seeing, by scipy.

usage: forecast_images.py KIND RADIUS WIDTH SIGMA DC,DR ...

KIND is star, ring or galaxy; RADIUS, WIDTH (standard deviation of a ring's rim) and SIGMA
(of the seeing) are in mirrors; DC,DR is a mirror's centre from the source's. Prints a line
a mirror: the part of the source's light on its unit square. A star is integrated by
dblquad; a ring or a galaxy is convolved with the seeing on a fine grid by FFT and summed
over the square.
"""
import sys

import numpy as np
from scipy.integrate import dblquad
from scipy.signal import fftconvolve

kind = sys.argv[1]
radius, width, sigma = (float(x) for x in sys.argv[2:5])
mirrors = [tuple(float(x) for x in a.split(",")) for a in sys.argv[5:]]


def star(dc, dr):
    def g(y, x):
        return np.exp(-(x * x + y * y) / (2 * sigma**2)) / (2 * np.pi * sigma**2)
    return dblquad(g, dc - 0.5, dc + 0.5, dr - 0.5, dr + 0.5, epsabs=1e-12)[0]


if kind == "star":
    for m in mirrors:
        print(repr(star(*m)))
    sys.exit()

fine = 8  # cells a mirror; odd multiples of half a cell keep squares whole
# The source reaches far, the seeing does not.
reach = int(np.ceil(radius + 8 * width)) if kind == "ring" else int(np.ceil(14 * radius))
axis = (np.arange(-reach * fine, reach * fine) + 0.5) / fine
x, y = np.meshgrid(axis, axis, indexing="ij")
r = np.hypot(x, y)
source = np.exp(-0.5 * ((r - radius) / width) ** 2) if kind == "ring" else np.exp(-r / radius)
if kind == "galaxy":  # the rest of the disc lies beyond the grid
    source /= 2 * np.pi * radius**2 * fine**2
else:
    source /= source.sum()
n = int(np.ceil(8 * sigma * fine))
k = np.arange(-n, n + 1) / fine
bell = np.exp(-0.5 * (k / sigma) ** 2)
seen = fftconvolve(source, np.outer(bell, bell) / bell.sum() ** 2, mode="same")
for dc, dr in mirrors:
    i, j = (int(round((v - 0.5 + reach) * fine)) for v in (dc, dr))
    print(repr(float(seen[i:i + fine, j:j + fine].sum())))
