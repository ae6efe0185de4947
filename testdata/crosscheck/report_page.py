"""Check pictures and charts of report.html against its cube.fits, as astropy,
wcslib and numpy see it.

usage: report_page.py FOLDER

Checked: the arrows of north and east against the WCS; every point of the grid of right
ascension and declination against the coordinate written on it; the scale bar against the
field's width; the wavelength of the line that is drawn; the picture's pixels against the mean over good voxels; the ring A
against the brightest place; the line of spectrum A against its voxels.
"""

import base64
import io
import re
import sys
import xml.etree.ElementTree as ET

import numpy as np
from astropy.io import fits
from astropy.wcs import WCS
from PIL import Image

folder = sys.argv[1]
with open(folder + "/report.html", encoding="utf-8") as f:
    html = f.read()
pictures = [ET.fromstring(s) for s in re.findall(r"<svg.*?</svg>", html, re.S)]
SVG = "{http://www.w3.org/2000/svg}"
drawn = [p for p in pictures if p.get("class") == "picture"]
picture = drawn[0]
assert picture.get("aria-label") == "White-light picture of the field", picture.attrib
charts = [p for p in pictures if p.get("aria-label", "").startswith("Spectrum ")]
assert len(charts) == 4, len(charts)
with fits.open(folder + "/cube.fits") as hdus:
    signal, flags, header = hdus["SIGNAL"].data.astype(float), hdus["FLAGS"].data, hdus["SIGNAL"].header
    variance = hdus["VARIANCE"].data.astype(float)
w = WCS(header).celestial
good = (flags & 127) == 0
planes, rows, elements = signal.shape


def one(tag, cls):
    found = [e for e in picture.iter(SVG + tag) if e.get("class") == cls]
    assert found, (tag, cls)
    return found


def numbers(e, *keys):
    return [float(e.get(k)) for k in keys]


# The picture's frame: where the field lies in the drawing.
image = next(picture.iter(SVG + "image"))
left, top, width, height = numbers(image, "x", "y", "width", "height")
unit_x, unit_y = width / elements, height / rows  # of the drawing, a voxel

# North and east: 1 arcsec from the centre, back to pixels, to the drawing.
ra, dec = header["CRVAL1"], header["CRVAL2"]
centre = np.array(w.wcs_world2pix(ra, dec, 1))
step = 1 / 3600
for cls, target in (("north", (ra, dec + step)), ("east", (ra + step / np.cos(np.radians(dec)), dec))):
    d = np.array(w.wcs_world2pix(*target, 1)) - centre
    want = np.degrees(np.arctan2(d[1] * unit_y, d[0] * unit_x))
    x1, y1, x2, y2 = numbers(one("line", cls)[0], "x1", "y1", "x2", "y2")
    got = np.degrees(np.arctan2(y1 - y2, x2 - x1))  # y runs downwards
    assert abs((got - want + 180) % 360 - 180) < 0.1, (cls, got, want)

# The scale: a round number of arc seconds is as long as the WCS says.
bar = one("line", "bar")[0]
x1, x2 = numbers(bar, "x1", "x2")
label = [t.text for t in picture.iter(SVG + "text") if t.text and t.text.endswith("″")]
assert len(label) == 1, label
arcsec_x = 3600 * np.hypot(header["CD1_1"], header["CD2_1"])
arcsec_y = 3600 * np.hypot(header["CD1_2"], header["CD2_2"])
assert abs((x2 - x1) - float(label[0][:-1]) * unit_x / arcsec_x) < 0.05
assert abs(unit_x / arcsec_x - unit_y / arcsec_y) < 1e-3, "arc seconds are not square"

# The grid of the sky: each point of a line lies at the coordinate in its title, to the
# rounding of the drawing, 0.01 units; the labels are among the titles.
scale = unit_x / arcsec_x  # units an arc second


def degrees(words):
    parts = words.replace("−", "-").lstrip("+-").split(":")
    value = sum(float(p) / 60**i for i, p in enumerate(parts))
    return -value if words[0] in "−-" else value


seen = {"meridian": 0, "parallel": 0}
for drawing in drawn[:2]:
    titles = set()
    for path in drawing.iter(SVG + "path"):
        cls = path.get("class")
        if cls not in seen:
            continue
        seen[cls] += 1
        words = path.find(SVG + "title").text
        titles.add(words)
        points = np.array(re.findall(r"(-?[\d.]+),(-?[\d.]+)", path.get("d")), float)
        assert len(points) >= 2
        pixels = np.column_stack([(points[:, 0] - left) / unit_x - 0.5, (top + height - points[:, 1]) / unit_y - 0.5])
        assert (pixels > -0.52).all() and (pixels < [elements - 0.48, rows - 0.48]).all(), "the grid leaves the field"
        a, d = w.wcs_pix2world(pixels, 0).T
        if cls == "parallel":
            off = (d - degrees(words)) * 3600
        else:
            off = ((a - 15 * degrees(words) + 180) % 360 - 180) * 3600 * np.cos(np.radians(d))
        assert np.abs(off).max() < 0.02 / scale + 0.005, (cls, words, off)
    for t in drawing.iter(SVG + "text"):
        if t.text and t.text.count(":") == 2:
            assert t.text in titles, (t.text, titles)
assert min(seen.values()) >= 4, seen

# The line that the nebula shines in is found, at 0.4 of the axis of wavelengths.
assert len(drawn) >= 2 and "line" in drawn[1].get("aria-label"), [p.attrib for p in drawn]
ranges = re.findall(r"Line at ([\d.]+) to ([\d.]+) nm", html)
nm = header["CRVAL3"] + 0.4 * planes * header["CD3_3"]
assert any(float(lo) <= nm <= float(hi) for lo, hi in ranges), (ranges, nm)

# The bitmap: transparent without a good voxel, else darker where brighter.
count = good.sum(axis=0)
white = np.where(good, signal, 0).sum(axis=0) / np.where(count > 0, count, 1)
data = image.get("href").split("base64,")[1]
rgba = np.array(Image.open(io.BytesIO(base64.b64decode(data))).convert("RGBA"))[::-1]
assert rgba.shape[:2] == (rows, elements), rgba.shape
assert np.array_equal(rgba[:, :, 3] == 0, count == 0)
assert (count == 0).any() and (count > 0).any()
grey, light = rgba[:, :, 0][count > 0].astype(int), white[count > 0]
order = np.argsort(light)
assert (np.diff(grey[order]) <= 0).all(), "the greys are not in the order of the light"
assert len(np.unique(grey)) > 30

# Ring A.
ring = one("circle", "ring")[0]
cx, cy = numbers(ring, "cx", "cy")
y, x = np.unravel_index(np.argmax(np.where(count >= 0.5 * count.max(), white, -np.inf)), white.shape)
assert abs(cx - (left + (x + 0.5) * unit_x)) < 0.02 and abs(cy - (top + height - (y + 0.5) * unit_y)) < 0.02, (cx, cy, x, y)

# Spectrum A: the vertices of its dark lines are a linear map of wavelength and
# signal, and those of its bands one of signal + and - sigma.
lines, bands = [], []
for path in charts[0].iter(SVG + "path"):
    style = path.get("class")
    points = np.array(re.findall(r"(-?[\d.]+),(-?[\d.]+)", path.get("d")), float)
    if style == "line":
        lines.append(points)
    elif style == "band":
        bands.append(points)
got = np.concatenate(lines)
ok = good[:, y, x]
wave, value, sigma = np.flatnonzero(ok), signal[ok, y, x], np.sqrt(variance[ok, y, x])
assert len(got) == len(wave), (len(got), len(wave))
for axis, want in ((0, wave), (1, value)):  # y runs downwards
    a, b = np.polyfit(want, got[:, axis], 1)
    assert a * (1 - 2 * axis) > 0 and np.abs(got[:, axis] - (a * want + b)).max() < 0.02, axis
upper = np.concatenate([p[: len(p) // 2] for p in bands])
lower = np.concatenate([p[len(p) // 2 :][::-1] for p in bands])
assert np.abs(upper[:, 1] - (a * (value + sigma) + b)).max() < 0.05
assert np.abs(lower[:, 1] - (a * (value - sigma) + b)).max() < 0.05
print("ok")
