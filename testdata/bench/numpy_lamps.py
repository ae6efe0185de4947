"""What the lamps of a night tell, in numpy: wavelengths, trace, response of pixels, slit and light path, neighbours, leak.

Part of numpy_full.py. A pixel (x, y) sees wavelength L of element j where, with l = L - L_c, q = y - y_c, i = j - (n-1)/2,
    x = x_c + x_0 + x_e i + (d1 + d_i i) l + d2 l^2 + d3 l^3 + tilt q + smile q^2.
"""
import csv
import os
import re

import numpy as np
from scipy.ndimage import gaussian_filter1d
from scipy.signal import find_peaks, savgol_filter

LISTS = os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "..", "configs", "lamps")
LAMP_KELVIN = 3000


def lamp_lines(lamp, first, last):
    """Vacuum wavelengths and intensities, the brightest of each gas being 1, of a lamp named by its gases."""
    symbols = re.findall("[A-Z][a-z]?", lamp)
    with open(os.path.join(LISTS, "lamp_lines.csv")) as f:
        rows = [(r["element"], float(r["vacuum_wavelength_nm"]), float(r["relative_intensity"])) for r in csv.DictReader(f)]
    rows = [r for r in rows if r[0] in symbols and first < r[1] < last]
    brightest = {s: max([r[2] for r in rows if r[0] == s], default=1) for s in symbols}
    rows.sort(key=lambda r: r[1])
    return np.array([r[1] for r in rows]), np.array([r[2] / brightest[r[0]] for r in rows])


def clear_lines(waves, strengths, px_per_nm, fwhm):
    """Lines that no other one may shift: none as strong as a hundredth, three either way, within 2.5 widths."""
    near = np.abs(waves[:, None] - waves) * abs(px_per_nm) < 2.5 * fwhm
    np.fill_diagonal(near, False)
    return waves[~(near & (strengths > 0.03 * strengths[:, None])).any(axis=1)]


def peaks(frame, noise, block=16):
    """Centres [x, y] of the lines in means over blocks of rows, by a parabola through the logarithm, and their widths."""
    found, widths = [], []
    for y in range(0, len(frame) - block + 1, block):
        line = np.median(frame[y:y + block], axis=0)
        sigma = np.sqrt((noise + np.maximum(line, 0)) / block) * 1.25
        at, _ = find_peaks(line, height=10 * sigma, distance=4)
        for x in at[(at > 3) & (at < len(line) - 4)]:
            near = line[x - 2:x + 3]
            if near.min() <= 0:
                continue
            c2, c1, _ = np.polyfit([-2, -1, 0, 1, 2], np.log(near), 2, w=near / near.max())
            if c2 < 0 and abs(c1 / (2 * c2)) < 1:
                found.append((x - c1 / (2 * c2), y + (block - 1) / 2))
                widths.append(2.3548 * np.sqrt(-0.5 / c2))
    return np.array(found).reshape(-1, 2), widths


class Geometry:
    """The mapping above, and the trace y = row + t s + c s^2, s = x - x_c."""

    def __init__(self, profile, target, n):
        spec = profile["spectrograph"]
        self.n, self.center, self.xc, self.yc = n, spec["center_nm"], spec["x_center_px"], spec["y_center_px"]
        width = spec["u_step_px"] * target["code"]["element_mirrors"]
        self.p = np.array([0, width, *spec["dispersion_px_per_nm"], spec["slit_tilt"], spec["smile_per_px"], 0])
        self.tilt, self.curve = spec["trace_tilt"], spec["trace_curve_per_px"]

    def terms(self, j, wave, y):
        i, l, q = np.broadcast_arrays(j - (self.n - 1) / 2, wave - self.center, y - self.yc)
        return np.stack([np.ones_like(l), i, l, l ** 2, l ** 3, q, q ** 2, i * l], axis=-1)

    def x(self, j, wave, y):
        return self.xc + self.terms(j, wave, y) @ self.p

    def trace(self, x):
        s = x - self.xc
        return s * (self.tilt + self.curve * s)

    def edges_px(self, grid, row, columns):
        """Detector columns, counted from the left edge, of the voxel edges of a trace row: [element, edge]."""
        wave = grid["first_nm"] + grid["step_nm"] * (np.arange(grid["count"] + 1) - 0.5)
        x0, x1, d1, d2, d3, tilt, smile, slope = self.p
        i, l = np.arange(self.n)[:, None] - (self.n - 1) / 2, wave - self.center
        base = self.xc + x0 + x1 * i + l * (d1 + slope * i + l * (d2 + l * d3))
        x = base
        for _ in range(4):
            q = row + self.trace(x) - self.yc
            x = base + q * (tilt + smile * q)
        return np.clip(x + 0.5, 0, columns)

    def distance(self, y, columns):
        """l = L - L_c at the pixels of detector row y, [element, x]."""
        x0, x1, d1, d2, d3, tilt, smile, slope = self.p
        i, q = np.arange(self.n)[:, None] - (self.n - 1) / 2, y - self.yc
        u = (np.arange(columns) - self.xc - x0 - q * (tilt + smile * q) - x1 * i) / (1 + slope / d1 * i)
        l = np.linspace(-1, 1, 4001) * 1.5 * columns / abs(d1)
        dispersed = l * (d1 + l * (d2 + l * d3))
        middle = np.argmin(abs(l))
        rising = np.diff(dispersed) * np.sign(d1) > 0
        first = middle - np.argmin(np.append(rising[:middle][::-1], False))
        last = middle + np.argmin(np.append(rising[middle:], False))
        part = slice(first, last + 1)
        order = slice(None) if d1 > 0 else slice(None, None, -1)
        return np.interp(u, dispersed[part][order], l[part][order])


def solve_arcs(g, frames, noise, lamp, grid, fwhm):
    """Fits g to arcs, a dict of frames by element; returns rms in px, lines per element, and the line width."""
    first, last = grid["first_nm"], grid["first_nm"] + grid["step_nm"] * grid["count"]
    waves, strengths = lamp_lines(lamp, first - (last - first) / 10, last + (last - first) / 10)
    lines = clear_lines(waves, strengths, g.p[2], fwhm)
    found, widths = {}, []
    for j, frame in frames.items():
        found[j], w = peaks(frame, noise)
        widths += w
    start(g, found, lines)
    reach = max(abs(p[1] - g.yc) for f in found.values() for p in f)
    for part, within in ((0.1, 2), (0.2, 2), (0.4, 2), (0.7, 2), (1, 2), (1, 1), (1, 0.5), (1, 0.3)):
        j, wave, at = match(g, found, lines, part * reach + 20, within)
        a, b = g.terms(j, wave, at[:, 1]), at[:, 0] - g.xc
        scale = np.abs(a).max(axis=0)
        fixed = 7 if part < 1 else 8
        if part < 0.4:  # a straight slit until rows far apart are matched
            fixed = 6
            b = b - a[:, 6] * g.p[6]
        g.p[:fixed] = np.linalg.lstsq((a / scale)[:, :fixed], b, rcond=None)[0] / scale[:fixed]
        rest = at[:, 0] - g.x(j, wave, at[:, 1])
    keep = np.abs(rest) < 3 * np.std(rest)
    a, b = g.terms(j, wave, at[:, 1])[keep], (at[:, 0] - g.xc)[keep]
    g.p = np.linalg.lstsq(a / scale, b, rcond=None)[0] / scale
    return np.std(b - a @ g.p), {k: int((j == k).sum()) for k in found}, float(np.median(widths))


def start(g, found, lines):
    """The shift and the stretch of the nominal wavelengths under which most lines of the middle rows fall on peaks."""
    middle = [(j, f[np.abs(f[:, 1] - g.yc) < 20]) for j, f in found.items()]
    best = (-1, 0, 1)
    for stretch in np.arange(0.97, 1.031, 0.002):
        score = np.zeros(401)
        for j, f in middle:
            base = g.terms(float(j), lines, g.yc)
            at = g.xc + base[:, :2] @ g.p[:2] + stretch * (base[:, 2:5] @ g.p[2:5])
            d = (f[:, 0][:, None] - at).ravel()
            score += np.histogram(d, 401, (-20.05, 20.05))[0]
        score = gaussian_filter1d(score, 4)
        if score.max() > best[0]:
            best = (score.max(), -20 + 0.1 * np.argmax(score), stretch)
    g.p[0] += best[1]
    g.p[2:5] *= best[2]


def match(g, found, lines, reach, within):
    """Element, line and peak [x, y] of every peak within so many rows that lies near one listed line."""
    js, waves, ats = [], [], []
    for j, f in found.items():
        f = f[np.abs(f[:, 1] - g.yc) < reach]
        d = f[:, 0][:, None] - g.x(float(j), lines, f[:, 1][:, None])
        near = np.argmin(np.abs(d), axis=1)
        good = np.abs(d[np.arange(len(f)), near]) < within
        js.append(np.full(good.sum(), float(j)))
        waves.append(lines[near[good]])
        ats.append(f[good])
    return np.concatenate(js), np.concatenate(waves), np.concatenate(ats)


def solve_trace(g, lamp, width=8):
    """Fits the trace to where the all-on light falls to half at both ends of the slit; returns the rows of the ends."""
    rows, columns = lamp.shape
    inner = np.median(lamp[rows // 4:-rows // 4], axis=0)
    points = []
    for x in range(0, columns - width + 1, width):
        if inner[x:x + width].mean() < 0.3 * inner.max():
            continue
        line = lamp[:, x:x + width].mean(axis=1)
        for end, profile in enumerate((line, line[::-1])):
            level = np.median(profile[24:40])
            y = np.argmax(profile > level / 2)
            if y > 0:
                at = y - (profile[y] - level / 2) / (profile[y] - profile[y - 1])
                points.append((x + (width - 1) / 2 - g.xc, at if end == 0 else rows - 1 - at, end))
    s, y, end = np.array(points).T
    keep = np.ones(len(s), bool)
    for _ in range(3):
        a = np.stack([end == 0, end == 1, s, s ** 2], axis=1).astype(float)
        p = np.linalg.lstsq(a[keep], y[keep], rcond=None)[0]
        rest = y - a @ p
        keep = np.abs(rest) < 3 * np.std(rest[keep])
    g.tilt, g.curve = p[2], p[3]
    return p[0], p[1]


def shifted(frame, shift):
    """A frame moved along y by a shift of each column, linearly."""
    rows, columns = frame.shape
    at = np.clip(np.arange(rows)[:, None] + shift, 0, rows - 1)
    low = np.minimum(at.astype(int), rows - 2)
    part, x = at - low, np.arange(columns)
    return (1 - part) * frame[low, x] + part * frame[low + 1, x]


def pixel_response(total, bad, shift, level=0.02, window=61):
    """P = A/S of the sum of the coded lamp frames; S follows the level of each row and is smooth along the trace."""
    straight = shifted(np.where(bad, np.nan, total), shift)
    lit = np.nanmedian(straight, axis=1)
    lit /= np.nanmax(lit)
    column = np.nanmedian(straight[lit > 0.9], axis=0)
    shape = lit[:, None] * column
    use = (shape > level * np.nanmax(shape)) & np.isfinite(straight)
    ratio = np.where(use, straight, 0) / np.where(use, shape, 1)
    sums = [savgol_filter(np.where(use, v, 0), window, 2, axis=1, mode="constant") for v in (ratio, 1.0)]
    smooth = np.where(sums[1] > 0.5, sums[0] / np.maximum(sums[1], 0.5), 1)
    s = shifted(smooth * shape, -shift)
    known = (s > level * np.nanmax(s)) & ~bad & (total > 0)
    p = np.where(known, total / np.where(known, s, 1), 1)
    return np.clip(p, 0.2, 5).astype("f4"), known


def planck_photons(nm, kelvin):
    """Photons per nm of a black body, relative."""
    return 1 / (nm ** 4 * np.expm1(1.438777e7 / (nm * kelvin)))


def known_lamp(profile, grid):
    """What is known of the lamp's light in each voxel: a black body through the profile's throughput."""
    wave = grid["first_nm"] + grid["step_nm"] * np.arange(grid["count"])
    t = profile["spectrograph"]["throughput"]
    fraction = np.interp(wave, [p["wavelength_nm"] for p in t], [p["fraction"] for p in t])
    c = profile["spectrograph"]["center_nm"]
    return fraction * planck_photons(wave, LAMP_KELVIN) / planck_photons(c, LAMP_KELVIN)


def slit_response(f, variance, flags, lamp, full_rows, window=41):
    """Response [voxel, row, element] = s(row, element) b(voxel, element) of mean 1, by alternating least squares."""
    w = np.where(flags == 0, 1 / np.maximum(variance, 1e-9), 0).astype("f4")
    w[:, ~full_rows] = 0
    b = np.repeat(lamp[:, None], f.shape[2], axis=1).astype("f4")
    place = np.linspace(-1, 1, len(lamp))
    for _ in range(2):
        s = np.einsum("lyj,lyj,lj->yj", w, f, b) / np.maximum(np.einsum("lyj,lj->yj", w, b * b), 1e-20)
        s[full_rows] = savgol_filter(s[full_rows], window, 2, axis=0)
        top = np.einsum("lyj,lyj,yj->lj", w, f, s)
        b = top / np.maximum(np.einsum("lyj,yj->lj", w, s * s), 1e-20)
        # The lamp may differ from what is known of it by a parabola common to all elements.
        ratio = b / np.maximum(lamp, 1e-12)[:, None]
        fit = np.polynomial.polynomial.Polynomial.fit(place, (ratio / ratio.mean(axis=0)).mean(axis=1), 2)
        colour = fit(place)
        ratio = savgol_filter(ratio / colour[:, None], window, 2, axis=0)
        b = (ratio * (colour * lamp)[:, None]).astype("f4")
    rows = np.flatnonzero(full_rows)
    s[:rows[0]], s[rows[-1] + 1:] = s[rows[0]], s[rows[-1]]
    response = s[None] * ratio[:, None].astype("f4")
    return (response / response[:, full_rows].mean()).astype("f4")


def light_moments(g, x):
    """sum_j c_j f_j l_j^k over the elements, k = 0..2, at each pixel of decoded light [element, y, x], c 1/2 at the ends."""
    n, rows, columns = x.shape
    out = np.empty((2, 3, rows, columns))
    ends = np.ones(n)
    ends[[0, -1]] = 0.5
    for y in range(rows):
        l = g.distance(y, columns)
        f = x[:, y].astype("f8")
        for k in range(3):
            out[0, k, y], out[1, k, y] = f.sum(axis=0), ends @ f
            f *= l
    return out


def colour_fit(term, moments, variance, use):
    """Coefficients of term = sum_k p_k moments_k and their errors, outliers of 6 sigma left out."""
    a = np.stack([m[use] for m in moments], axis=1) / np.sqrt(variance[use])[:, None]
    b = term[use] / np.sqrt(variance[use])
    keep = np.abs(b - np.median(b)) < 6 * 1.4826 * np.median(np.abs(b - np.median(b)))
    a, b = a[keep], b[keep]
    scale = np.abs(a).max(axis=0)
    normal = np.linalg.inv((a / scale).T @ (a / scale))
    p = normal @ ((a / scale).T @ b)
    return p / scale, np.sqrt(np.diag(normal)) / scale
