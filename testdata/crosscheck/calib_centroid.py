"""A Gaussian star fitted by scipy.

usage: calib_centroid.py STAR.json: picture ([row][element], flat), sigma, elements, x and y
(first and last place used); prints Element, Row, their errors and Light as JSON.
"""
import json
import sys

import numpy as np
from scipy.optimize import curve_fit

with open(sys.argv[1]) as f:
    s = json.load(f)
picture = np.array(s["picture"]).reshape(-1, s["elements"])
y, x = np.mgrid[s["y"][0]:s["y"][1] + 1, s["x"][0]:s["x"][1] + 1]


def model(at, a, x0, y0, sx, sy, level):
    return a * np.exp(-((at[0] - x0) / sx) ** 2 / 2 - ((at[1] - y0) / sy) ** 2 / 2) + level


values = picture[y, x].ravel()
p, c = curve_fit(model, (x.ravel(), y.ravel()), values, p0=[100, 10, 20, 1, 2, 50],
                 sigma=np.full(values.size, float(s["sigma"])), absolute_sigma=True)
print(json.dumps({"Element": p[1], "Row": p[2], "ElementErr": c[1, 1] ** 0.5, "RowErr": c[2, 2] ** 0.5,
                  "Light": 2 * np.pi * p[0] * abs(p[3] * p[4])}))
