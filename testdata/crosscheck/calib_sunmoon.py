"""Print for each line "UTC latitude longitude" of a file the altitude of the sun, that of the
moon, the moon's lit part, its right ascension and declination, by astropy (get_sun, get_body
with its built-in ephemeris; degrees).

usage: calib_sunmoon.py FILE
"""
import sys
import warnings

import astropy.units as u
import numpy as np
from astropy.coordinates import AltAz, EarthLocation, get_body, get_sun
from astropy.time import Time
from astropy.utils import iers

iers.conf.auto_download = False
iers.conf.iers_degraded_accuracy = "ignore"
warnings.simplefilter("ignore")

for line in open(sys.argv[1]):
    utc, latitude, longitude = line.split()
    time = Time(utc)
    site = EarthLocation.from_geodetic(float(longitude) * u.deg, float(latitude) * u.deg, 0 * u.m)
    frame = AltAz(obstime=time, location=site)
    sun, moon = get_sun(time), get_body("moon", time, site)
    lit = (1 - np.cos(get_body("moon", time).separation(get_sun(time)))) / 2
    geocentric = get_body("moon", time)
    print(sun.transform_to(frame).alt.deg, moon.transform_to(frame).alt.deg, float(lit), geocentric.ra.deg, geocentric.dec.deg)
