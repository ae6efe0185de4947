"""Check the place of a star and a line in truth.fits through astropy's WCS.

usage: rehearse_truth.py [TRUTH.fits EAST NORTH NM]...

The star's centroid (SIGNAL - SKY summed over wavelength) and its line's centroid
are compared with the voxel at which wcslib puts the sky place, EAST and NORTH arc
seconds from CRVAL in the tangent plane, and NM. Prints the three differences in
voxels of each file.
"""
import sys

import numpy as np
from astropy import units
from astropy.io import fits
from astropy.wcs import WCS

for path, *place in zip(*[iter(sys.argv[1:])] * 4):
    east, north, nm = map(float, place)
    hdus = fits.open(path)
    signal = hdus["SIGNAL"].data.astype(float) - hdus["SKY"].data
    header = hdus["SIGNAL"].header
    wcs = WCS(header)
    assert units.Unit(header["BUNIT"]) == units.ct, header["BUNIT"]
    total = np.nansum(signal)
    l, y, x = np.indices(signal.shape)
    centroid = [np.nansum(signal * axis) / total for axis in (x, y, l)]
    # The tangent plane, by hand (Calabretta & Greisen 2002, section 5.1.3).
    ra0, dec0 = np.radians(header["CRVAL1"]), np.radians(header["CRVAL2"])
    xi, eta = np.radians(east / 3600), np.radians(north / 3600)
    ra = ra0 + np.arctan2(xi, np.cos(dec0) - eta * np.sin(dec0))
    dec = np.arctan((np.sin(dec0) + eta * np.cos(dec0)) / (np.cos(dec0) - eta * np.sin(dec0)) * np.cos(ra - ra0))
    want = wcs.all_world2pix([[np.degrees(ra), np.degrees(dec), nm * 1e-9]], 0)[0]
    print(*(repr(float(c - w)) for c, w in zip(centroid, want)))
