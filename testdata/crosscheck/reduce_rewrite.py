"""Rewrite the frames of a night with astropy, in the forms that observatories use.

usage: reduce_rewrite.py JOBS.json; each job: night (folder of *.fits), out (a
folder that is made), form, and what the form needs. Pixel values stay what they
are, and this script checks that astropy reads them back so.

forms: plain (bitpix), scaled (bitpix, bscale, bzero: physical = bscale stored +
bzero), extension, gzip, keywords (map of names, kinds map of words), layout (runs
of columns [first, last] from 1, in the new order).
"""

import glob
import json
import os
import sys

import numpy as np
from astropy.io import fits

TYPES = {8: np.uint8, 16: np.int16, 32: np.int32, 64: np.int64, -32: np.float32, -64: np.float64}
STRUCTURE = {"SIMPLE", "BITPIX", "NAXIS", "NAXIS1", "NAXIS2", "EXTEND", "BZERO", "BSCALE", "CHECKSUM", "DATASUM"}


def stored(values, bitpix):
    """The values as bitpix holds them; none may be lost."""
    out = values.astype(TYPES[bitpix])
    assert np.array_equal(out, values), f"values of {values.min()} to {values.max()} do not fit BITPIX {bitpix}"
    return out


def cards_of(header):
    return [c for c in header.cards if c.keyword not in STRUCTURE]


def build(job, values, cards):
    form = job["form"]
    if form == "keywords":
        names, kinds = job["map"], job["kinds"]
        cards = [(names.get(c.keyword, c.keyword), kinds.get(c.value, c.value) if c.keyword == "KIND" else c.value) for c in cards]
    header = fits.Header(cards)
    if form == "layout":
        values = np.concatenate([values[:, a - 1 : b] for a, b in job["runs"]], axis=1)
    if form == "extension":
        # Half of the cards stand in the primary header, half in the extension's.
        half = len(cards) // 2
        image = fits.ImageHDU(stored(values, 32), fits.Header(cards[half:]), name="CHIP")
        return fits.HDUList([fits.PrimaryHDU(header=fits.Header(cards[:half])), image])
    if form == "scaled":
        raw = (values - job["bzero"]) / job["bscale"]
        hdu = fits.PrimaryHDU(stored(raw, job["bitpix"]), header)
        hdu.header["BSCALE"], hdu.header["BZERO"] = job["bscale"], job["bzero"]
        return fits.HDUList([hdu])
    return fits.HDUList([fits.PrimaryHDU(stored(values, job.get("bitpix", 16)), header)])


def rewrite(job):
    os.mkdir(job["out"])
    suffix = ".gz" if job["form"] == "gzip" else ""
    paths = sorted(glob.glob(os.path.join(job["night"], "*.fits")))
    for path in paths:
        with fits.open(path) as hdus:
            values, cards = hdus[0].data.astype(float), cards_of(hdus[0].header)
        out = os.path.join(job["out"], os.path.basename(path)) + suffix
        build(job, values, cards).writeto(out)
        if path == paths[-1]:
            check(job, out, values)
    return len(paths)


def check(job, out, values):
    """What was written has the values and the BITPIX that were meant."""
    with fits.open(out) as hdus:
        data = next(h.data for h in hdus if h.data is not None)
        assert job["form"] == "layout" or np.array_equal(data, values), out
    with fits.open(out, do_not_scale_image_data=True) as hdus:
        image = next(h for h in hdus if h.data is not None)
        want = job.get("bitpix", 32 if job["form"] == "extension" else 16)
        assert image.header["BITPIX"] == want, (out, image.header["BITPIX"])
        assert ("BSCALE" in image.header) == (job["form"] == "scaled"), out


with open(sys.argv[1]) as f:
    print(sum(rewrite(job) for job in json.load(f)), "frames")
