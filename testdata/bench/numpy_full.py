#!/usr/bin/env python3
"""What an observer would write instead of `reduce` with its default recipe: numpy, scipy, astropy, a whole night in memory.

usage: numpy_full.py NIGHT SEQUENCE OUT.fits

The same steps as `mirrorloom reduce` takes, each in the plainest array form: masters and bad pixels; lines of the arcs
identified and the geometry fitted; the trace from the ends of the slit; a coded cycle of lamp frames decoded for the
response of pixels, slit and light path, the light of open neighbours and the leak; gain and line width; levels of frames
from unlit pixels; pairing and throughput from the dark columns with hold-out; the all-off light by its fitted factor;
struck samples by matching pursuit; decoding, variances and error scale; trace, wavelengths, world coordinates, flags.
Persistence, the flat's depth and terms of colour are left to mirrorloom, which is the slower for it.
"""
import os
import sys
import time
import warnings

import numpy as np
from astropy.io import fits
from astropy.table import Table

import numpy_dark as dark
import numpy_lamps as lamps
from numpy_elements import amplifiers, read_night, read_yaml
from numpy_reduce import clipped_mean, rebin, running_sum, straighten, to_electrons, world

NODATA, SATURATED, BADPIXEL, LOWFLAT, PARTIAL, RESTORED = 1, 2, 4, 8, 32, 256


class Night:
    """Sequence, profile and masters; frames are read when they are needed."""

    def __init__(self, night, sequence):
        self.folder = night
        with fits.open(os.path.join(sequence, "sequence.fits")) as hdus:
            self.table, self.code, elements = hdus["STEPS"].data, hdus["CODE"].data, hdus["ELEMENTS"].data
        self.kinds = {int(s): k.strip() for s, k in zip(self.table["STEP"], self.table["KIND"])}
        self.index = {int(s): i for i, s in enumerate(self.table["STEP"])}
        self.profile = read_yaml(os.path.join(sequence, "profile.yaml"))
        self.target = read_yaml(os.path.join(sequence, "target.yaml"))
        dark_column = elements["DARK"]
        self.columns = elements["COLUMN"][~dark_column].astype(int)
        self.dark_columns = elements["COLUMN"][dark_column].astype(int)

    def read(self, *kinds):
        return read_night(self.folder, self.kinds, kinds)

    def electrons(self, frames):
        return to_electrons(np.stack([frames[s] for s in sorted(frames)]), self.profile)

    def rows(self, steps):
        return self.code[[self.index[s] for s in steps]].astype("f8")

    def seconds(self, step):
        return float(self.table["EXPTIME"][self.index[step]])

    def masters(self):
        frames = self.read("bias", "dark", "all-off")
        bias, self.noise = self.electrons(frames["bias"])
        self.bias = clipped_mean(bias)
        self.dark = (clipped_mean(self.electrons(frames["dark"])[0]) - self.bias) / self.seconds(min(frames["dark"]))
        self.offs = len(frames["all-off"])
        self.off = clipped_mean(self.electrons(frames["all-off"])[0]) - self.bias
        charge = self.dark * self.seconds(min(frames["dark"]))
        excess = charge - np.median(charge, axis=1, keepdims=True)
        noise = (self.noise + np.maximum(charge, 0)) / len(frames["dark"])
        self.bad = (excess > 10 * self.noise) & (excess > 8 * np.sqrt(noise))

    def without_light(self, frames):
        """Frames in electrons less bias and dark current."""
        return self.electrons(frames)[0] - self.bias - self.dark * self.seconds(min(frames))


def lamp_frames(night):
    """All-on, even, odd and off means, the coded cycle in its order with its code rows; gain from a pair of frames."""
    flats = night.read("flat")["flat"]
    even = np.zeros(night.code.shape[1], "u1")
    even[night.columns[::2]] = 1
    rows = {s: night.code[night.index[s]] for s in flats}
    kind = {s: "on" if r.all() else "off" if not r.any() else
            "coded" if night.table["ROW"][night.index[s]] >= 0 else "even" if (r == even).all() else "odd"
            for s, r in rows.items()}
    means = {}
    for name in ("on", "even", "odd", "off"):
        part = night.without_light({s: f for s, f in flats.items() if kind[s] == name})
        means[name] = (clipped_mean(part), len(part))
        if name == "on" and len(part) > 1:
            d = (part[1] - part[0])[8:-8:4, 8:-8:4].ravel()
            m = (part[1] + part[0])[8:-8:4, 8:-8:4].ravel() / 2
            edges = np.quantile(m, np.linspace(0, 1, 33))
            parts = [(m >= a) & (m < b) for a, b in zip(edges, edges[1:])]
            points = [(m[i].mean(), (1.4826 * np.median(np.abs(d[i]))) ** 2 / 2) for i in parts if i.sum() > 50]
            print(f"gain is {1 / np.polyfit(*np.array(points).T, 1)[0]:.4f} of the profile's")
    coded = {s: flats.pop(s) for s in sorted(flats) if kind[s] == "coded"}
    return means, night.without_light(coded), night.rows(sorted(coded))


def rectify(g, grid, x, variance, flag, shift):
    """Decoded light [element, y, x] and its variance [y, x] on the cube's voxels [voxel, row, element], with flags."""
    n, rows, width = x.shape
    nl = grid["count"]
    signal, var, flags = (np.empty((nl, rows, n), t) for t in ("f4", "f4", "i2"))
    variance = variance[None].copy()
    straighten(x, shift)
    straighten(variance, shift)
    pixel_edges = np.arange(width + 1)
    for y in range(rows):
        at = g.edges_px(grid, y, width)
        share = np.diff(at, axis=1)
        signal[:, y] = rebin(x[:, y], at).T
        var[:, y] = np.diff(running_sum(variance[0, y])(at), axis=1).T
        out = np.where(share <= 0, NODATA, 0)
        for bit in (SATURATED, BADPIXEL, RESTORED):
            if not (flag[y] & bit).any():
                continue
            hit = np.concatenate([[0], np.cumsum(flag[y] & bit > 0)])
            out |= np.where(np.diff(np.interp(at, pixel_edges, hit), axis=1) > 0.1, bit, 0)
        flags[:, y] = out.T
    return signal, var, flags


def calibrate(night):
    """Geometry, pixel response, response [voxel, row, element], and the neighbour term's coefficients if significant."""
    profile, grid = night.profile, night.profile["grid"]
    fwhm = profile["spectrograph"]["lsf_fwhm_px"]
    g = night.geometry = lamps.Geometry(profile, night.target, len(night.columns))
    arcs = night.read("arc")["arc"]
    element = {c: j for j, c in enumerate(night.columns)}
    lit = {element[int(np.flatnonzero(night.code[night.index[s]])[0])]: s for s in arcs}
    lamp = str(night.table["LAMP"][night.index[min(arcs)]]).strip()
    clean = {j: night.without_light({s: arcs[s]})[0] for j, s in lit.items()}
    rms, night.lines, width = lamps.solve_arcs(g, clean, night.noise, lamp, grid, fwhm)
    print(f"arcs: {sum(night.lines.values())} lines, rms {rms:.4f} px, width {width:.2f} px")
    del arcs, clean

    means, coded, w = lamp_frames(night)
    night.ends = lamps.solve_trace(g, means["on"][0])
    shift = g.trace(np.arange(coded.shape[2]))
    total = coded.sum(axis=0)
    near = np.nanmedian(np.stack([np.roll(total, k, axis=1) for k in range(-8, 9) if k]), axis=0)
    night.bad |= (total < 0.5 * near) & (near > 900 * night.noise * len(coded))
    p, known = lamps.pixel_response(total, night.bad, shift)
    off = means["off"][0]
    y = coded - off
    v = len(w)
    a = np.linalg.inv(w).astype("f4")
    variance = 4 / (v + 1) ** 2 * (total + v * night.noise) / p ** 2
    flag = np.where(night.bad, BADPIXEL, 0)
    neighbour = None
    for _ in range(2):
        x = (a @ y.reshape(v, -1))[night.columns].reshape(-1, *total.shape)
        if neighbour is not None:
            x = without_neighbours(night, x, w, a, neighbour)
        moments = lamps.light_moments(g, x)
        noise = sum((m + night.noise) / n for m, n in means.values())
        lit = (near > 0.05 * near.max()) & ~night.bad
        term = means["on"][0] - means["even"][0] - means["odd"][0] + off
        curve = means["even"][0] ** 2 + means["odd"][0] ** 2 - means["on"][0] ** 2  # what a detector's curve leaves
        d, sigma = lamps.colour_fit(term, [*moments[1][:2], curve], np.maximum(noise, 1), lit)
        neighbour = d if d[0] > 3 * sigma[0] else None
        leak, leak_sigma = lamps.colour_fit(off, [*moments[0], np.ones_like(off)], np.maximum((off + night.noise) / means["off"][1], 1), lit)
        x /= p
        f, var, flags = rectify(g, grid, x, variance, flag, shift)
        full = (np.arange(len(p)) > night.ends[0] + 3 * fwhm) & (np.arange(len(p)) < night.ends[1] - 3 * fwhm)
        response = lamps.slit_response(f, var, flags, lamps.known_lamp(profile, grid), full)
    print(f"neighbours {d[0]:.5f} +- {sigma[0]:.5f}, contrast {1 + 1 / leak[0]:.0f} +- {leak_sigma[0] / leak[0] ** 2:.0f}")
    return p, response, shift, neighbour


def without_neighbours(night, x, w, a, d):
    """Takes out d(L) (f_j + f_j+1)/2 of all frames in which both are open."""
    pairs = w[:, night.columns[:-1]] * w[:, night.columns[1:]]
    mix = (a[night.columns] @ pairs).astype("f4")
    middle = np.stack([night.geometry.distance(y, x.shape[2])[[0, -1]].mean(axis=0) for y in range(x.shape[1])])
    lent = (x[:-1] + x[1:]) / 2 * (d[0] + d[1] * middle).astype("f4")
    return x - (mix @ lent.reshape(len(lent), -1)).reshape(x.shape)


def science(night, p, neighbour):
    """Decoded light, its variance, flags and error scale by pixel."""
    frames = night.read("science")["science"]
    order = sorted(frames)
    raw = np.stack([frames.pop(s) for s in order])
    saturated_raw = (raw >= night.profile["detector"]["saturation_adu"]).any(axis=0)
    y, noise = to_electrons(raw, night.profile)
    del raw
    y -= night.bias
    w, shape = night.rows(order), y.shape[1:]
    v = len(w)
    saturated = np.empty(shape, bool)
    for raw_y, raw_x, x, _ in amplifiers(night.profile):
        saturated[:, x] = saturated_raw[raw_y, raw_x]
    a = np.linalg.inv(w)
    basis = dark.row_basis(a[night.dark_columns]).astype("f4")

    # Levels of frames on pixels that no mirror lights.
    rows = np.arange(shape[0])[:, None] - night.geometry.trace(np.arange(shape[1]))
    unlit = ((rows < night.ends[0] - 7) | (rows > night.ends[1] + 7)) & ~night.bad
    if unlit.sum() > 1000:
        level = np.array([np.mean(np.clip(f[unlit] - night.off[unlit], -20, 20)) for f in y])
        error = np.sqrt(noise.mean() / unlit.sum() + noise.mean() / (32 * 16))
        if np.var(level) > error ** 2 * (1 + 5 * np.sqrt(2 / v)):
            y -= level[:, None, None]

    # Which frame shows which mask, and how much light it got: from every 16th row.
    sample = y[:, 8::16].reshape(v, -1)
    off = night.off[8::16].ravel()
    good = ~(night.bad | saturated)[8::16].ravel()
    sample, off = sample[:, good], off[good]
    s2 = sample + np.tile(noise, (shape[0] - 8 + 15) // 16)[good]
    s2 = np.maximum(s2, 1)
    e, factor = np.zeros(v), 1.0
    when = np.array([night.index[s] for s in order], "f8")
    when = (when - when.min()) / np.ptp(when) - 0.5
    for _ in range(2):
        clean = (sample * (1 + e)[:, None].astype("f4") - factor * off).astype("f4")
        k, pixel, charge, _, unclear, _ = dark.pursue(basis @ clean, s2.mean(axis=0), basis, len(basis) // 4)
        clean = sample.copy()
        np.subtract.at(clean, (k, pixel), charge)
        clean, s2, off = clean[:, ~unclear], s2[:, ~unclear], off[~unclear]
        sample = sample[:, ~unclear]
        pairing = dark.best_pairing(dark.gram(clean - off, s2)[0], basis.T @ basis)
        e, posterior, kept, before, after = dark.throughput(clean - off, s2, a[night.dark_columns], when)
        if not kept:
            e, posterior = np.zeros(v), np.zeros((v, v))
        factor, _ = dark.off_factor(clean * (1 + e)[:, None], s2, off, basis, noise.mean() / night.offs)
    print(f"frames are {pairing}; dark columns {before:.3f}, with throughputs {after:.3f}; all-off light x {factor:.3f}")
    night.throughput, night.order = 1 / (1 + e), order

    total = (y.sum(axis=0) + v * noise)
    for k in range(v):
        total += posterior[k, k] * y[k] ** 2
        y[k] *= 1 + e[k]
    y -= factor * night.off
    y = y.reshape(v, -1)
    residual = basis @ y
    s2 = np.maximum(total.reshape(-1) / v, 1)
    spread, ambiguous = np.zeros(shape[0] * shape[1], "f4"), np.zeros(shape[0] * shape[1], bool)
    struck = np.zeros(shape[0] * shape[1], bool)
    for row in range(shape[0]):  # a row at a time: the scores of all pixels would be as large as the night
        part = slice(row * shape[1], (row + 1) * shape[1])
        k, pixel, charge, spread[part], ambiguous[part], residual[:, part] = dark.pursue(residual[:, part], s2[part], basis, len(basis) // 4)
        keep = ~ambiguous[part][pixel]
        np.subtract.at(y, (k[keep], part.start + pixel[keep]), charge[keep])
        struck[part.start + pixel[keep]] = True
    print(f"{struck.sum()} pixels restored, {ambiguous.sum()} ambiguous")
    measured = (residual ** 2).mean(axis=0)
    measured[ambiguous] = s2[ambiguous]
    q, applied = dark.error_scale(measured.reshape(shape), s2.reshape(shape), len(basis))
    x = (a[night.columns].astype("f4") @ y).reshape(-1, *shape)
    del y
    if neighbour is not None:
        x = without_neighbours(night, x, w, a.astype("f4"), neighbour)
    variance = 4 / (v + 1) ** 2 * (total + spread.reshape(shape)) * applied / p ** 2
    x /= p
    flag = np.where(night.bad | ambiguous.reshape(shape), BADPIXEL, 0) | np.where(saturated, SATURATED, 0)
    return x, variance, flag | np.where(struck.reshape(shape), RESTORED, 0), q


def main(folder, sequence, out):
    start = time.time()
    warnings.simplefilter("ignore", RuntimeWarning)  # a median of nothing: dead columns
    night = Night(folder, sequence)
    night.masters()
    p, response, shift, neighbour = calibrate(night)
    x, variance, flag, q = science(night, p, neighbour)
    g, grid = night.geometry, night.profile["grid"]
    signal, var, flags = rectify(g, grid, x, variance, flag, shift)
    del x
    scale = np.empty_like(signal)
    for y in range(scale.shape[1]):
        at = g.edges_px(grid, y, q.shape[1])
        scale[:, y] = (np.diff(running_sum(q[y].astype("f8"))(at), axis=1) / np.maximum(np.diff(at, axis=1), 1e-9)).T
    low = ~(response > 0.1)
    signal /= np.where(low, 1, response)
    var /= np.where(low, 1, response) ** 2
    flags[low] |= LOWFLAT
    dark_rows = (np.arange(len(p)) < night.ends[0]) | (np.arange(len(p)) > night.ends[1])
    flags[:, dark_rows] |= NODATA
    signal[flags & NODATA > 0] = np.nan

    header = world(night.profile, night.target, len(night.columns))
    tables = [Table({"STEP": night.order, "THROUGHPUT": night.throughput}), Table({
        "ELEMENT": list(night.lines), "NLINES": list(night.lines.values()), "COEF": np.tile(g.p, (len(night.lines), 1))})]
    hdus = fits.HDUList(
        [fits.PrimaryHDU()] + [fits.ImageHDU(d, header, name=name) for d, name in
                               ((signal, "SIGNAL"), (var, "VARIANCE"), (flags, "FLAGS"), (scale, "SCALE"))]
        + [fits.table_to_hdu(t) for t in tables] + [fits.ImageHDU(response[:, ::64].copy(), name="RESPONSE")])
    hdus.writeto(out, overwrite=True, checksum=True)
    with open(out, "rb") as f:  # as safe on disk as what it is compared with
        os.fsync(f.fileno())
    print(f"{len(night.order)} frames, {len(night.columns)} elements, {time.time() - start:.2f} s")


if __name__ == "__main__":
    main(*sys.argv[1:4])
