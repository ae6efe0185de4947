#!/usr/bin/env python3
"""What an observer would write instead of `reduce --products elements`: numpy and astropy, a whole night in memory.

usage: numpy_elements.py NIGHT SEQUENCE OUT.fits

Subtracts the mean bias frame, multiplies by the inverse of the code and writes SIGNAL and VARIANCE of the element
cube, every code column, in electrons. A yardstick for time and memory, not for the sky.
"""
import glob
import os
import re
import sys
import time

import numpy as np
import yaml
from astropy.io import fits


# PyYAML takes 4e-07, a number by YAML 1.2, for text.
yaml.SafeLoader.add_implicit_resolver(
    "tag:yaml.org,2002:float", re.compile(r"^[-+]?[0-9]+e[-+]?[0-9]+$"), list("-+0123456789"))


def read_yaml(path):
    with open(path) as f:
        return yaml.safe_load(f)


def read_night(night, steps, kinds):
    """Frames of the kinds wanted, by kind and step, as float32 raw values."""
    found = {kind: {} for kind in kinds}
    for path in sorted(glob.glob(os.path.join(night, "*.fits"))):
        with fits.open(path, memmap=False) as hdus:
            step = hdus[0].header.get("STEP")
            kind = steps.get(step)
            if kind in found:
                found[kind][step] = hdus[0].data.astype("f4")
    return found


def amplifiers(profile):
    """Raw data section, place among the active columns, gain and read noise of each amplifier (side by side)."""
    x = 0
    for amp in sorted(profile["detector"]["amplifiers"], key=lambda a: a["data"][0]):
        x1, x2, y1, y2 = amp["data"]
        yield slice(y1 - 1, y2), slice(x1 - 1, x2), slice(x, x + x2 - x1 + 1), amp
        x += x2 - x1 + 1


def main(night, sequence, out):
    start = time.time()
    with fits.open(os.path.join(sequence, "sequence.fits")) as hdus:
        table, code = hdus["STEPS"].data, hdus["CODE"].data
        steps = {int(s): k.strip() for s, k in zip(table["STEP"], table["KIND"])}
        index = {int(s): i for i, s in enumerate(table["STEP"])}
    profile = read_yaml(os.path.join(sequence, "profile.yaml"))
    frames = read_night(night, steps, ("bias", "science"))
    order = sorted(frames["science"])
    y = np.stack([frames["science"].pop(s) for s in order])
    if frames["bias"]:
        y -= np.mean(list(frames["bias"].values()), axis=0)
    rows, columns = profile["detector"]["rows"], profile["detector"]["columns"]
    e = np.empty((len(order), rows, columns), "f4")
    noise = np.empty(columns, "f4")
    for raw_y, raw_x, x, amp in amplifiers(profile):
        e[:, :, x] = y[:, raw_y, raw_x] * amp["gain_e_per_adu"]
        noise[x] = amp["read_noise_e"] ** 2 + amp["gain_e_per_adu"] ** 2 / 12
    del y
    w = code[[index[s] for s in order]].astype("f8")
    v = w.shape[1]
    a = np.linalg.inv(w).astype("f4")
    e = e.reshape(len(order), -1)
    signal = a @ e
    # An S-matrix: the entries of a are all alike but for their sign.
    total = e.sum(axis=0) + v * np.tile(noise, rows)
    variance = np.broadcast_to(4 / (v + 1) ** 2 * total.astype("f4"), signal.shape)
    shape = (v, rows, columns)
    hdus = fits.HDUList([fits.PrimaryHDU(), fits.ImageHDU(signal.reshape(shape), name="SIGNAL"),
                         fits.ImageHDU(variance.reshape(shape), name="VARIANCE")])
    hdus.writeto(out, overwrite=True)
    with open(out, "rb") as f:  # as safe on disk as what it is compared with
        os.fsync(f.fileno())
    print(f"{len(order)} frames, {shape[0]} columns, {time.time() - start:.2f} s")


if __name__ == "__main__":
    main(*sys.argv[1:4])
