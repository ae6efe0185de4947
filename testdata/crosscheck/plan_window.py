"""Print, for a place and a site, when the place culminates nearest to a time and from when to
when its zenith distance is below 60 degrees about then, by astropy in steps of 30 s; minutes
from that time, and the sun's altitude at the time, degrees.

usage: plan_window.py RA DEC LATITUDE LONGITUDE UTC
"""
import sys
import warnings

import astropy.units as u
import numpy as np
from astropy.coordinates import AltAz, EarthLocation, SkyCoord, get_sun
from astropy.time import Time
from astropy.utils import iers

iers.conf.auto_download = False
iers.conf.iers_degraded_accuracy = "ignore"
warnings.simplefilter("ignore")

ra, dec, latitude, longitude = map(float, sys.argv[1:5])
time = Time(sys.argv[5])
site = EarthLocation.from_geodetic(longitude * u.deg, latitude * u.deg, 0 * u.m)
minutes = np.arange(-1440, 1440, 0.5)
altitude = SkyCoord(ra * u.deg, dec * u.deg).transform_to(AltAz(obstime=time + minutes * u.min, location=site)).alt.deg
near = np.abs(minutes) < 719
top = np.argmax(np.where(near, altitude, -90))
first = last = top
while altitude[first - 1] > 30:
    first -= 1
while altitude[last + 1] > 30:
    last += 1
print(minutes[top], minutes[first], minutes[last], get_sun(time).transform_to(AltAz(obstime=time, location=site)).alt.deg)
