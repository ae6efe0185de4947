"""Maps of stars by numpy's least squares: shift, turn and scale as one complex factor, or
an affine map.

usage: calib_registration.py STARS.json; a list of {affine, stars: [{U, W, East, North,
Sigma}]}; prints [{East: [3], North: [3]}], coefficients of 1, u, w.
"""
import json
import sys

import numpy as np

answers = []
with open(sys.argv[1]) as f:
    cases = json.load(f)
for case in cases:
    u, w, east, north, sigma = (np.array([s[k] for s in case["stars"]]) for k in ("U", "W", "East", "North", "Sigma"))
    if case["affine"]:
        a = np.column_stack([np.ones_like(u), u, w]) / sigma[:, None]
        e = np.linalg.lstsq(a, east / sigma, rcond=None)[0]
        n = np.linalg.lstsq(a, north / sigma, rcond=None)[0]
    else:
        # Parity 1: north + i east is a turn of (w - i u), by a complex factor.
        a = np.column_stack([np.ones_like(u), w - 1j * u]) / sigma[:, None]
        shift, factor = np.linalg.lstsq(a, (north + 1j * east) / sigma, rcond=None)[0]
        n = [shift.real, factor.imag, factor.real]
        e = [shift.imag, -factor.real, factor.imag]
    answers.append({"East": list(e), "North": list(n)})
print(json.dumps(answers))
