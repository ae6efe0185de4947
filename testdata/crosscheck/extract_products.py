"""Read products of extract with astropy: extract_products.py CUBE DIR prints, as JSON,
how far the celestial coordinates of image and cube differ, how far ERROR squared is
from the diagonal of COVARIANCE, and the place of element 3, row 5.
extract_products.py sexagesimal RA DEC prints a place in hours and degrees."""

import json
import sys

import astropy.units as u
import numpy as np
from astropy.coordinates import SkyCoord
from astropy.io import fits
from astropy.wcs import WCS

if sys.argv[1] == "sexagesimal":
    place = SkyCoord(float(sys.argv[2]) * u.deg, float(sys.argv[3]) * u.deg)
    print(place.ra.to_string(u.hour, sep=":", precision=6), place.dec.to_string(u.deg, sep=":", precision=5, alwayssign=True), end="")
    sys.exit()

cube, folder = sys.argv[1], sys.argv[2]
with fits.open(cube) as c, fits.open(folder + "/band.fits", checksum=True) as b, \
        fits.open(folder + "/lines.fits", checksum=True) as lines, fits.open(folder + "/spectrum.fits", checksum=True) as s:
    sky = WCS(c["SIGNAL"].header).celestial
    places = sky.all_pix2world([[0, 0], [11, 7], [22, 15]], 0)
    differ = np.abs(WCS(b["SIGNAL"].header).all_pix2world([[0, 0], [11, 7], [22, 15]], 0) - places).max(axis=0)
    more = np.abs(WCS(lines["CHI2"].header).all_pix2world([[0, 0], [11, 7], [22, 15]], 0) - places).max(axis=0)
    assert lines["FLUX"].data.shape == (1,) + b["SIGNAL"].data.shape
    assert s["SPECTRUM"].columns["SIGNAL"].unit == "ct" and b["SIGNAL"].header["BUNIT"] == "ct"
    error, covariance = s["SPECTRUM"].data["ERROR"], s["COVARIANCE"].data
    known = np.isfinite(error)
    assert known.sum() > 10 and s[0].header["CUBESHA"] == b[0].header["CUBESHA"]
    print(json.dumps({
        "RADiff": max(differ[0], more[0]), "DecDiff": max(differ[1], more[1]),
        "VarianceDiff": float(np.abs(covariance[known, 0] / error[known] ** 2 - 1).max()),
        "Center": sky.all_pix2world([[3, 5]], 0)[0].tolist(),
    }))
