#!/usr/bin/env python3
"""What an observer would write instead of `reduce`: numpy, scipy and astropy, a whole night in memory.

usage: numpy_reduce.py NIGHT SEQUENCE OUT.fits

The same steps as `mirrorloom reduce` takes, each in the plainest array form: overscan, master bias and dark, all-off
light, saturation and dead pixels, gain, decoding by the inverse matrix, variances, the trace and the wavelengths by
interpolating running sums with quintic splines, world coordinates, SIGNAL, VARIANCE, FLAGS. A yardstick for time and
memory; its splines and clipping are scipy's and numpy's, so its voxels agree only within the errors.
"""
import os
import sys
import time

import numpy as np
import yaml
from astropy.io import fits
from scipy.ndimage import map_coordinates, uniform_filter1d

from numpy_elements import amplifiers, read_night


def to_electrons(stack, profile):
    """[frame, raw row, raw column] to electrons above the overscan, [frame, row, column], and the read variance."""
    det = profile["detector"]
    out = np.empty((len(stack), det["rows"], det["columns"]), "f4")
    noise = np.empty(det["columns"], "f4")
    for raw_y, raw_x, x, amp in amplifiers(profile):
        gain = amp["gain_e_per_adu"]
        if amp.get("overscan"):
            x1, x2, y1, y2 = amp["overscan"]
            level = uniform_filter1d(stack[:, y1 - 1:y2, x1 - 1:x2].mean(axis=2), 17, axis=1)[:, :, None]
        else:
            level = amp["bias_adu"]
        out[:, :, x] = (stack[:, raw_y, raw_x] - level) * gain
        noise[x] = amp["read_noise_e"] ** 2 + gain ** 2 / 12
    return out, noise


def clipped_mean(stack, sigmas=4):
    centre = np.median(stack, axis=0)
    scatter = 1.4826 * np.median(np.abs(stack - centre), axis=0) + 0.5
    return np.ma.masked_where(np.abs(stack - centre) > sigmas * scatter, stack).mean(axis=0).filled(0).astype("f4")


def edges_px(spec, grid, width, n, j, rows, columns):
    """Detector columns, counted from the left edge, of the voxel edges of element j: [trace row, edge]."""
    wave = grid["first_nm"] + grid["step_nm"] * (np.arange(grid["count"] + 1) - 0.5) - spec["center_nm"]
    d1, d2, d3 = spec["dispersion_px_per_nm"]
    base = spec["x_center_px"] + width * (j - (n - 1) / 2) + wave * (d1 + wave * (d2 + wave * d3))
    x = base + np.zeros((rows, 1))
    for _ in range(4):
        s = x - spec["x_center_px"]
        q = np.arange(rows)[:, None] + s * (spec["trace_tilt"] + spec["trace_curve_per_px"] * s) - spec["y_center_px"]
        x = base + q * (spec["slit_tilt"] + spec["smile_per_px"] * q)
    return np.clip(x + 0.5, 0, columns)


def running_sum(values, axis):
    """Running sum along an axis, 0 first."""
    return np.insert(np.cumsum(values, axis=axis, dtype="f8"), 0, 0, axis=axis)


def straighten(image, shift):
    """Follow the trace: the light between y - 1/2 + shift(x) and y + 1/2 + shift(x)."""
    rows, columns = image.shape
    at = np.clip(np.arange(rows + 1)[:, None] + shift, 0, rows)
    across = np.broadcast_to(np.arange(columns), at.shape)
    return np.diff(map_coordinates(running_sum(image, 0), [at, across], order=5, mode="nearest"), axis=0)


def rebin(image, at):
    """The light of each row between the edges at[row]."""
    along = np.broadcast_to(np.arange(len(image))[:, None], at.shape)
    return np.diff(map_coordinates(running_sum(image, 1), [along, at], order=5, mode="nearest"), axis=1)


def main(night, sequence, out):
    start = time.time()
    with fits.open(os.path.join(sequence, "sequence.fits")) as hdus:
        table, code, elements = hdus["STEPS"].data, hdus["CODE"].data, hdus["ELEMENTS"].data
        steps = {int(s): k.strip() for s, k in zip(table["STEP"], table["KIND"])}
        index = {int(s): i for i, s in enumerate(table["STEP"])}
        seconds = {int(s): float(t) for s, t in zip(table["STEP"], table["EXPTIME"])}
    with open(os.path.join(sequence, "profile.yaml")) as f:
        profile = yaml.safe_load(f)
    with open(os.path.join(sequence, "target.yaml")) as f:
        target = yaml.safe_load(f)
    frames = read_night(night, steps, ("bias", "dark", "all-off", "flat", "science"))
    lamps = {s: f for s, f in frames["flat"].items() if code[index[s]].all()}

    def stack(chosen):
        return to_electrons(np.stack([chosen[s] for s in sorted(chosen)]), profile)

    bias = clipped_mean(stack(frames["bias"])[0])
    dark_time = seconds[next(iter(frames["dark"]))] if frames["dark"] else 1
    dark = (clipped_mean(stack(frames["dark"])[0]) - bias) / dark_time if frames["dark"] else 0 * bias
    off = clipped_mean(stack(frames["all-off"])[0]) - bias if frames["all-off"] else None
    lamp = clipped_mean(stack(lamps)[0]) - bias if lamps else None

    order = sorted(frames["science"])
    raw = np.stack([frames["science"].pop(s) for s in order])
    saturated_raw = (raw >= profile["detector"]["saturation_adu"]).any(axis=0)
    y, noise = to_electrons(raw, profile)
    del raw
    y -= bias
    saturated = np.empty(bias.shape, bool)
    for raw_y, raw_x, x, _ in amplifiers(profile):
        saturated[:, x] = saturated_raw[raw_y, raw_x]
    bad = np.zeros(bias.shape, bool)
    if lamp is not None:
        near = np.median(np.stack([np.roll(lamp, k, axis=1) for k in range(-8, 9) if k]), axis=0)
        bad = (lamp < 0.5 * near) & (near > 900 * noise)

    w = code[[index[s] for s in order]].astype("f8")
    v, k = w.shape[1], int(w[0].sum())
    a = np.linalg.inv(w).astype("f4")
    shape = y.shape[1:]
    total = (y.sum(axis=0) + v * noise).reshape(-1)
    y -= off if off is not None else dark * seconds[order[0]]
    x = a @ y.reshape(v, -1)
    del y
    variance = (4 / (v + 1) ** 2 * total).reshape(shape)
    columns = [int(c) for c, dark_column in zip(elements["COLUMN"], elements["DARK"]) if not dark_column]
    x = x[columns].reshape(len(columns), *shape)

    spec, grid = profile["spectrograph"], profile["grid"]
    n, rows, width = len(columns), shape[0], shape[1]
    s = np.arange(width) - spec["x_center_px"]
    shift = s * (spec["trace_tilt"] + spec["trace_curve_per_px"] * s)
    flag = np.where(bad, 4, 0) | np.where(saturated, 2, 0)
    step_px = spec["u_step_px"] * target["code"]["element_mirrors"]
    nl = grid["count"]
    signal, var, flags = (np.empty((nl, rows, n), t) for t in ("f4", "f4", "i2"))
    straight_variance = straighten(variance, shift)
    any_bad = (flag > 0).astype("f8")
    for j in range(n):
        at = edges_px(spec, grid, step_px, n, j, rows, width)
        signal[:, :, j] = rebin(straighten(x[j], shift), at).T
        var[:, :, j] = rebin(straight_variance, at).T
        reach = np.abs(rebin(any_bad, at)) > 0.1
        flags[:, :, j] = (np.where(reach, 4, 0) | np.where(np.diff(at, axis=1) <= 0, 1, 0)).T

    header = fits.Header()
    arcsec = profile["dmd"]["arcsec_per_mirror"] / (2 ** 0.5 if profile["dmd"]["mounting"] == "diagonal" else 1)
    c1, c2 = arcsec / 3600 * target["code"]["element_mirrors"], arcsec / 3600 / spec["w_step_px"]
    t = np.radians(target["rotang_deg"])
    header.update(CTYPE1="RA---TAN", CTYPE2="DEC--TAN", CTYPE3="WAVE", CUNIT1="deg", CUNIT2="deg", CUNIT3="nm",
                  CRPIX1=(n + 1) / 2, CRPIX2=spec["y_center_px"] + 1, CRPIX3=1.0, CRVAL1=target["ra_deg"],
                  CRVAL2=target["dec_deg"], CRVAL3=grid["first_nm"], CD1_1=-c1 * np.cos(t), CD1_2=c2 * np.sin(t),
                  CD2_1=c1 * np.sin(t), CD2_2=c2 * np.cos(t), CD3_3=grid["step_nm"])
    hdus = fits.HDUList([fits.PrimaryHDU()] + [fits.ImageHDU(d, header, name=name) for d, name in
                        ((signal, "SIGNAL"), (var, "VARIANCE"), (flags, "FLAGS"))])
    hdus.writeto(out, overwrite=True)
    with open(out, "rb") as f:  # as safe on disk as what it is compared with
        os.fsync(f.fileno())
    print(f"{len(order)} frames, {n} elements, {time.time() - start:.2f} s")


if __name__ == "__main__":
    main(*sys.argv[1:4])
