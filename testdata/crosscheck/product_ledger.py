"""Compare the FRAMES table of a FITS file, read by astropy, with ledger.csv,
read by Python's csv module.

usage: product_ledger.py TABLE.fits LEDGER.csv
"""

import csv
import math
import sys

from astropy.io import fits

with open(sys.argv[2], newline="", encoding="utf-8") as f:
    rows = list(csv.DictReader(f))
with fits.open(sys.argv[1], checksum=True) as hdus:
    table = hdus["FRAMES"].data
    columns = {c.name: c for c in hdus["FRAMES"].columns}
want = (
    "step file kind maskid matched_by date_obs exptime_s verdict saturated_fraction throughput throughput_err offset_e note".split()
)
assert list(rows[0]) == want, list(rows[0])
assert list(columns) == [w.upper() for w in want], list(columns)
assert columns["EXPTIME_S"].unit == "s" and columns["OFFSET_E"].unit == "ct"
assert len(table) == len(rows), (len(table), len(rows))


def ascii(text):
    """Characters beyond ASCII, as the table writes them."""
    return "".join(c if c < "\x7f" else f"\\u{ord(c):04x}" if ord(c) < 0x10000 else f"\\U{ord(c):08x}" for c in text)


for i, row in enumerate(rows):
    for key, text in row.items():
        value = table[key.upper()][i]
        if key == "step":
            ok = int(text) == value
        elif columns[key.upper()].format == "D":
            ok = math.isnan(value) if text == "" else float(text) == value
        else:
            ok = value == ascii(text).rstrip(" ")  # FITS ignores trailing spaces (4.2.1)
        assert ok, f"row {i}, {key}: {value!r} in FITS, {text!r} in CSV"
print(len(rows), "rows")
