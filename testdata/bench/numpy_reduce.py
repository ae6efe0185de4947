#!/usr/bin/env python3
"""What an observer would write instead of `reduce`: numpy, scipy and astropy, a whole night in memory.

usage: numpy_reduce.py NIGHT SEQUENCE OUT.fits

The same steps as `mirrorloom reduce` takes, each in the plainest array form: overscan, master bias and dark, all-off
light, saturation, hot and dead pixels, gain, decoding by the inverse matrix, variances, the trace and the wavelengths by
interpolating running sums with quintic splines, world coordinates, SIGNAL, VARIANCE, FLAGS. A yardstick for time and
memory; its splines and clipping are scipy's and numpy's, so its voxels agree only within the errors.
"""
import os
import sys
import time

import numpy as np
from astropy.io import fits
from scipy.interpolate import BSpline, make_interp_spline
from scipy.ndimage import uniform_filter1d

from numpy_elements import amplifiers, read_night, read_yaml


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


def edges_px(spec, grid, width, n, y, columns):
    """Detector columns, counted from the left edge, of the voxel edges of trace row y: [element, edge]."""
    wave = grid["first_nm"] + grid["step_nm"] * (np.arange(grid["count"] + 1) - 0.5) - spec["center_nm"]
    d1, d2, d3 = spec["dispersion_px_per_nm"]
    base = spec["x_center_px"] + wave * (d1 + wave * (d2 + wave * d3)) \
        + width * (np.arange(n)[:, None] - (n - 1) / 2)
    x = base
    for _ in range(4):
        s = x - spec["x_center_px"]
        q = y + s * (spec["trace_tilt"] + spec["trace_curve_per_px"] * s) - spec["y_center_px"]
        x = base + q * (spec["slit_tilt"] + spec["smile_per_px"] * q)
    return np.clip(x + 0.5, 0, columns)


def running_sum(values):
    """Quintic spline through the running sum along the first axis, from 0 before the first pixel; many at once."""
    total = np.zeros((len(values) + 1,) + values.shape[1:])
    np.cumsum(values, axis=0, out=total[1:])
    return make_interp_spline(np.arange(len(total)), total, k=5, check_finite=False)


def straighten(stack, shift, block=64):
    """Follow the trace, in place: the light between y - 1/2 + shift(x) and y + 1/2 + shift(x), of [plane, y, x]."""
    planes, rows, columns = stack.shape
    edges = np.arange(rows + 1.0)
    for x0 in range(0, columns, block):
        part = np.moveaxis(stack[:, :, x0:x0 + block], 1, 0)
        spline = running_sum(part)
        for i in range(part.shape[2]):
            one = BSpline.construct_fast(spline.t, np.ascontiguousarray(spline.c[:, :, i]), 5)
            stack[:, :, x0 + i] = np.diff(one(np.clip(edges + shift[x0 + i], 0, rows)), axis=0).T


def rebin(lines, at):
    """The light of each line [x] of [line, x] between the edges at[line]."""
    spline = running_sum(lines.T)
    c = np.ascontiguousarray(spline.c.T)
    return np.stack([np.diff(BSpline.construct_fast(spline.t, c[j], 5)(at[j])) for j in range(len(at))])


def world(profile, target, n):
    """World coordinates of a cube of n elements."""
    spec, grid = profile["spectrograph"], profile["grid"]
    header = fits.Header()
    arcsec = profile["dmd"]["arcsec_per_mirror"] / (2 ** 0.5 if profile["dmd"]["mounting"] == "diagonal" else 1)
    c1, c2 = arcsec / 3600 * target["code"]["element_mirrors"], arcsec / 3600 / spec["w_step_px"]
    t = np.radians(target["rotang_deg"])
    header.update(CTYPE1="RA---TAN", CTYPE2="DEC--TAN", CTYPE3="WAVE", CUNIT1="deg", CUNIT2="deg", CUNIT3="nm",
                  CRPIX1=(n + 1) / 2, CRPIX2=spec["y_center_px"] + 1, CRPIX3=1.0, CRVAL1=target["ra_deg"],
                  CRVAL2=target["dec_deg"], CRVAL3=grid["first_nm"], CD1_1=-c1 * np.cos(t), CD1_2=c2 * np.sin(t),
                  CD2_1=c1 * np.sin(t), CD2_2=c2 * np.cos(t), CD3_3=grid["step_nm"])
    return header


def main(night, sequence, out):
    start = time.time()
    with fits.open(os.path.join(sequence, "sequence.fits")) as hdus:
        table, code, elements = hdus["STEPS"].data, hdus["CODE"].data, hdus["ELEMENTS"].data
        steps = {int(s): k.strip() for s, k in zip(table["STEP"], table["KIND"])}
        index = {int(s): i for i, s in enumerate(table["STEP"])}
        seconds = {int(s): float(t) for s, t in zip(table["STEP"], table["EXPTIME"])}
    profile = read_yaml(os.path.join(sequence, "profile.yaml"))
    target = read_yaml(os.path.join(sequence, "target.yaml"))
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
    charge = dark * seconds[order[0]]
    excess = charge - np.median(charge, axis=1, keepdims=True)
    bad = (excess > 10 * noise) & (excess > 8 * np.sqrt((noise + np.maximum(charge, 0)) / max(1, len(frames["dark"]))))
    if lamp is not None:
        near = np.median(np.stack([np.roll(lamp, k, axis=1) for k in range(-8, 9) if k]), axis=0)
        bad |= (lamp < 0.5 * near) & (near > 900 * noise)

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
    flag = bad | saturated
    step_px = spec["u_step_px"] * target["code"]["element_mirrors"]
    nl = grid["count"]
    signal, var, flags = (np.empty((nl, rows, n), t) for t in ("f4", "f4", "i2"))
    variance = variance[None]
    straighten(x, shift)
    straighten(variance, shift)
    pixel_edges = np.arange(width + 1)
    for y in range(rows):
        at = edges_px(spec, grid, step_px, n, y, width)
        signal[:, y] = rebin(x[:, y], at).T
        spread = running_sum(variance[0, y])
        var[:, y] = np.diff(spread(at), axis=1).T
        hit = np.concatenate([[0], np.cumsum(flag[y])])
        reach = np.diff(np.interp(at, pixel_edges, hit), axis=1) > 0.1
        flags[:, y] = (np.where(reach, 4, 0) | np.where(np.diff(at, axis=1) <= 0, 1, 0)).T

    header = world(profile, target, n)
    hdus = fits.HDUList([fits.PrimaryHDU()] + [fits.ImageHDU(d, header, name=name) for d, name in
                        ((signal, "SIGNAL"), (var, "VARIANCE"), (flags, "FLAGS"))])
    hdus.writeto(out, overwrite=True)
    with open(out, "rb") as f:  # as safe on disk as what it is compared with
        os.fsync(f.fileno())
    print(f"{len(order)} frames, {n} elements, {time.time() - start:.2f} s")


if __name__ == "__main__":
    main(*sys.argv[1:4])
