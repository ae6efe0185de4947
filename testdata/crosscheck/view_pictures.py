"""Pictures of a cube's bands by numpy, against files LAYER-FROM-TO.f32 of float32.

usage: view_pictures.py CUBE DIR. Prints for each file the largest difference over the
largest value, infinite where one has a value and the other none.
"""

import json
import pathlib
import sys

import numpy as np
from astropy.io import fits

cube = fits.open(sys.argv[1])
signal, variance, scale = (cube[n].data.astype(float) for n in ("SIGNAL", "VARIANCE", "SCALE"))
flags = cube["FLAGS"].data
bad = cube["FLAGS"].header["FLAGBAD"]
good = (flags & bad == 0) & np.isfinite(signal) & np.isfinite(variance) & (variance > 0)


def picture(layer, band):
    g = good[band]
    n = g.sum(axis=0)
    s, v, q = (np.where(g, x[band], 0).sum(axis=0) for x in (signal, variance, scale))
    if layer == "flags":
        return np.bitwise_or.reduce(flags[band], axis=0).astype(float)
    with np.errstate(divide="ignore", invalid="ignore"):
        return {"signal": s / n, "variance": v / n, "noise": np.sqrt(v) / n, "sn": s / np.sqrt(v), "scale": q / n}[layer]


answer = {}
for path in pathlib.Path(sys.argv[2]).glob("*.f32"):
    layer, first, last = path.stem.split("-")
    want = picture(layer, slice(int(first), int(last) + 1))
    got = np.fromfile(path, "<f4").reshape(want.shape)
    if (np.isnan(want) != np.isnan(got)).any():
        answer[path.stem] = 1e300
    elif np.isnan(want).all():
        answer[path.stem] = 0.0
    else:
        answer[path.stem] = float(np.nanmax(np.abs(got - want)) / max(np.nanmax(np.abs(want)), 1e-30))
print(json.dumps(answer))
