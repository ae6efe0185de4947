"""Write FITS images of every kind with astropy, and the physical values beside them.

usage: fitsutil_read_images.py FOLDER

For each case FOLDER gets NAME.fits (or NAME.fits.gz) and NAME.f32: little-endian float32 of
BZERO + BSCALE * stored, worked out by numpy in float64 and rounded once, with NaN for BLANK.
The rule is FITS Standard 4.0, Eq. 3 of section 4.4.2.5. Each case is also read back by astropy
and must agree with these values to the last bits that astropy's own float32 scaling leaves.
Prints a JSON list of the cases.
"""
import json
import os
import sys

import numpy as np
from astropy.io import fits

folder = sys.argv[1]
rng = np.random.default_rng(20260101)
cases = []
STORED = {8: np.uint8, 16: np.int16, 32: np.int32, 64: np.int64, -32: np.float32, -64: np.float64}


def samples(bitpix, shape):
    """Stored values over the whole range of the type, extremes included."""
    kind = STORED[bitpix]
    if bitpix > 0:
        limits = np.iinfo(kind)
        data = rng.integers(limits.min, limits.max, size=shape, dtype=kind, endpoint=True)
        data.flat[:2] = limits.min, limits.max
        return data
    data = (rng.normal(size=shape) * 10.0 ** rng.integers(-20, 20, size=shape)).astype(kind)
    data.flat[:5] = 0.0, -0.0, np.nan, np.inf, 1e30
    return data


def physical(stored, bscale=1.0, bzero=0.0, blank=None):
    if bscale == 1 and stored.dtype == np.int64 and bzero == 2**63:
        values = (stored.view(np.uint64) ^ np.uint64(2**63)).astype(np.float32)
    elif bscale == 1 and bzero == 0:
        values = stored.astype(np.float32)
    else:
        values = (bzero + bscale * stored.astype(np.float64)).astype(np.float32)
    if blank is not None:
        values[stored == blank] = np.nan
    return values


def image(stored, bscale=None, bzero=None, blank=None, extension=False):
    """An HDU that holds these stored bytes under these cards."""
    hdu = fits.ImageHDU(stored) if extension else fits.PrimaryHDU(stored)
    if bscale is not None:
        hdu.header["BSCALE"] = bscale
    if bzero is not None:
        hdu.header["BZERO"] = bzero
    if blank is not None:
        hdu.header["BLANK"] = blank
    return hdu


def save(name, hdus, index, values, suffix=".fits"):
    path = os.path.join(folder, name + suffix)
    fits.HDUList(hdus).writeto(path)
    values.astype("<f4").tofile(os.path.join(folder, name + ".f32"))
    # uint=False: the unsigned types of numpy have no NaN, so astropy would pass over BLANK.
    with fits.open(path, memmap=False, uint=False) as back:
        zero = abs(float(back[index].header.get("BZERO", 0)))  # gone once the data are read
        again = np.asarray(back[index].data, dtype=np.float64)
    finite = np.isfinite(values)
    # astropy scales in float32: its sum is off by a rounding of either term.
    slack = 3e-7 * (np.abs(values[finite]) + 2 * zero) + 1e-38
    assert np.all(np.abs(again[finite] - values[finite]) <= slack), name
    assert np.array_equal(np.isnan(again), np.isnan(values)), name
    cases.append({"name": name + suffix, "values": name + ".f32", "hdu": index, "axes": list(values.shape[::-1])})


UNSIGNED = {8: -128, 16: 2**15, 32: 2**31, 64: 2**63}
SHAPES = {"1d": (41,), "2d": (29, 37), "3d": (3, 13, 17)}
for bitpix in STORED:
    for label, shape in SHAPES.items():
        stored = samples(bitpix, shape)
        save(f"plain_{bitpix}_{label}", [image(stored)], 0, physical(stored))
    stored = samples(bitpix, SHAPES["2d"])
    with np.errstate(over="ignore"):
        save(f"scaled_{bitpix}", [image(stored, 0.3, -17.25)], 0, physical(stored, 0.3, -17.25))
    save(f"extension_{bitpix}", [fits.PrimaryHDU(), image(stored, extension=True)], 1, physical(stored))
    if bitpix < 0:
        continue
    # astropy writes unsigned data itself: BZERO is of its own making.
    unsigned = stored.view(f"u{stored.itemsize}") if bitpix > 8 else stored.view(np.int8)
    save(f"unsigned_{bitpix}", [fits.PrimaryHDU(unsigned)], 0, unsigned.astype(np.float32))
    blank = int(stored.flat[5])
    save(f"blank_{bitpix}", [image(stored, blank=blank)], 0, physical(stored, blank=blank))
    save(f"blank_scaled_{bitpix}", [image(stored, 0.5, 3.0, blank)], 0, physical(stored, 0.5, 3.0, blank))
    if bitpix > 8:
        save(f"blank_unsigned_{bitpix}", [image(stored, 1, UNSIGNED[bitpix], blank)], 0,
             physical(stored, 1, float(UNSIGNED[bitpix]), blank))

stored = samples(16, (50, 60))
save("packed", [image(stored, 1, 32768)], 0, physical(stored, 1, 32768.0), ".fits.gz")
save("packed_extension", [fits.PrimaryHDU(), image(stored, extension=True)], 1, physical(stored), ".fits.gz")

# Four amplifiers in one frame, by sections, and as four extensions behind a table.
frame = samples(16, (44, 70))
save("amplifiers", [image(frame, 1, 32768)], 0, physical(frame, 1, 32768.0))
table = fits.BinTableHDU.from_columns([fits.Column(name="A", format="3J", array=np.arange(6).reshape(2, 3))])
quarters = [frame[:22, :35], frame[:22, 35:], frame[22:, :35], frame[22:, 35:]]
hdus = [fits.PrimaryHDU(), table] + [image(np.ascontiguousarray(q), extension=True) for q in quarters]
for i, q in enumerate(quarters):
    hdus[2 + i].header["EXTNAME"] = f"AMP{i + 1}"
save("extensions", hdus, 3, physical(quarters[1]))

json.dump(cases, sys.stdout)
