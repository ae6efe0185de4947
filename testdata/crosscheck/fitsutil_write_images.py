"""Reads FITS files written by fitsutil and compares them with what was meant.

Argument: a folder with manifest.json and the files it names. Any warning of
astropy, wrong checksums included, is an error; so is an HDU without sums.
Samples are compared bit by bit with a raw little-endian dump, card values by
type and value.
"""
import json
import os
import sys
import warnings

import numpy
from astropy.io import fits

warnings.simplefilter("error")
folder = sys.argv[1]
with open(os.path.join(folder, "manifest.json")) as f:
    manifest = json.load(f)
images = cards = 0
for entry in manifest:
    path = os.path.join(folder, entry["file"])
    with fits.open(path, checksum=True) as hdus:
        hdus.verify("exception")
        assert len(hdus) == entry["hdus"], (path, len(hdus))
        for hdu in hdus:
            assert "CHECKSUM" in hdu.header and "DATASUM" in hdu.header, (path, hdu.name)
        hdu = hdus[entry["index"]]
        assert hdu.name == entry["name"], (path, hdu.name)
        if entry["dump"]:
            raw = numpy.fromfile(os.path.join(folder, entry["dump"]), dtype="<" + entry["dtype"])
            want = raw.reshape(entry["axes"][::-1])
            got = hdu.data
            # astropy gives native types for unsigned samples, big-endian ones otherwise
            assert got.dtype.newbyteorder("<") == want.dtype, (path, got.dtype, want.dtype)
            assert got.shape == want.shape, (path, got.shape)
            assert got.astype(want.dtype).tobytes() == want.tobytes(), path
            images += 1
        for card in entry["cards"] or []:
            got = hdu.header[card["Key"]]
            want = card["Value"]
            if card["Kind"] == "float64":
                want = float(want)
            assert type(got) is type(want) and got == want, (path, card, got)
            assert hdu.header.comments[card["Key"]] == card["Comment"], (path, card)
            cards += 1
        for line in entry["history"] or []:
            assert line in str(hdu.header["HISTORY"]), (path, line)
print(images, "images,", cards, "cards")
