"""Reads tables written by fitsutil with astropy, all warnings as errors.

Arguments: a FITS file and a JSON file {table: {column: {format, unit, values}}}
with NaN as null. Checks the sums, names, formats, units, the extra cards and
every value.
"""
import json
import math
import sys
import warnings

import numpy
from astropy.io import fits

warnings.simplefilter("error")
path, expected = sys.argv[1], json.load(open(sys.argv[2]))
count = 0
with fits.open(path, checksum=True) as hdus:
    hdus.verify("exception")
    assert [h.name for h in hdus[1:]] == list(expected), [h.name for h in hdus]
    for name, columns in expected.items():
        hdu = hdus[name]
        assert "CHECKSUM" in hdu.header and "DATASUM" in hdu.header
        assert hdu.header["OBSERVER"] == "it's me" and hdu.header.comments["OBSERVER"] == "extra card"
        assert list(hdu.columns.names) == list(columns), hdu.columns.names
        for key, want in columns.items():
            column = hdu.columns[key]
            assert column.format == want["format"], (key, column.format)
            assert (column.unit or "") == want["unit"], (key, column.unit)
            assert column.null == want["null"], (key, column.null)
            got = numpy.asarray(hdu.data[key])
            assert len(got) == want["rows"], (key, len(got))
            got = got.ravel().tolist()
            assert len(got) == len(want["values"]), (key, len(got))
            for g, w in zip(got, want["values"]):
                same = math.isnan(g) if w is None else type(g) is type(w) or isinstance(g, float)
                assert same and (w is None or g == w), (name, key, g, w)
            count += len(got)
print(count, "values")
