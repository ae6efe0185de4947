"""Fits world coordinates to places with astropy and prints the sky at some others.

usage: register_points.py POINTS.json, with X, Y (from 0), RA, Dec, Corners.
"""
import json
import sys

import numpy as np
from astropy.coordinates import SkyCoord
from astropy.wcs.utils import fit_wcs_from_points

with open(sys.argv[1]) as f:
    points = json.load(f)
sky = SkyCoord(points["RA"], points["Dec"], unit="deg", frame="icrs")
wcs = fit_wcs_from_points((np.array(points["X"]), np.array(points["Y"])), sky, proj_point="center", projection="TAN")
ra, dec = wcs.all_pix2world(*np.array(points["Corners"]).T, 0)
print(json.dumps([[float(a), float(d)] for a, d in zip(ra, dec)]))
