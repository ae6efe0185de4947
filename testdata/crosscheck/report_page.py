"""Check pictures and charts of report.html against its cube.fits, as astropy,
wcslib and numpy see it.

usage: report_page.py FOLDER

Checked: the arrows of north and east against the WCS; the scale bar against the
field's width; the picture's pixels against the mean over good voxels; the ring A
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
picture, charts = pictures[0], pictures[1:]
assert picture.get("class") == "picture" and len(charts) == 3, len(charts)
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
label = [t.text for t in picture.iter(SVG + "text") if t.text.endswith("″")]
assert len(label) == 1, label
arcsec_x = 3600 * np.hypot(header["CD1_1"], header["CD2_1"])
arcsec_y = 3600 * np.hypot(header["CD1_2"], header["CD2_2"])
assert abs((x2 - x1) - float(label[0][:-1]) * unit_x / arcsec_x) < 0.05
assert abs(unit_x / arcsec_x - unit_y / arcsec_y) < 1e-3, "arc seconds are not square"

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
    style = path.get("style")
    points = np.array(re.findall(r"(-?[\d.]+),(-?[\d.]+)", path.get("d")), float)
    if "stroke:#202020" in style:
        lines.append(points)
    elif "fill:#C4C4C4" in style:
        bands.append(points)
got = np.concatenate(lines)
ok = good[:, y, x]
wave, value, sigma = np.flatnonzero(ok), signal[ok, y, x], np.sqrt(variance[ok, y, x])
assert len(got) == len(wave), (len(got), len(wave))
for axis, want in ((0, wave), (1, value)):
    a, b = np.polyfit(want, got[:, axis], 1)
    assert a > 0 and np.abs(got[:, axis] - (a * want + b)).max() < 0.02, axis
upper = np.concatenate([p[: len(l)] for p, l in zip(bands, lines)])
lower = np.concatenate([p[len(l) : 2 * len(l)][::-1] for p, l in zip(bands, lines)])
assert np.abs(upper[:, 1] - (a * (value + sigma) + b)).max() < 0.05
assert np.abs(lower[:, 1] - (a * (value - sigma) + b)).max() < 0.05
print("ok")
