"""Print how fast refraction moves light of one wavelength against that of another, arc
seconds an hour, for each case of a JSON file: first with tan z and the zenith's direction
by astropy and the published formula of the air's index, written out here anew; then with
astropy's own refraction.

usage: trade_refraction.py CASES.json
"""
import json
import sys
import warnings

import astropy.units as u
import numpy as np
from astropy.coordinates import AltAz, EarthLocation, SkyCoord
from astropy.time import Time
from astropy.utils import iers

iers.conf.auto_download = False
iers.conf.iers_degraded_accuracy = "ignore"
warnings.simplefilter("ignore")

ARCSEC = 206264.80624709636
SPAN = 60.0  # seconds to either side


def refractivity(case, nm):
    """n - 1 by Filippenko 1982, equations 1 to 3; millimetres of mercury."""
    p, f, t = case["hpa"] * 0.750061683, case["water_hpa"] * 0.750061683, case["celsius"]
    s2 = (1000.0 / nm) ** 2
    sea = 64.328 + 29498.1 / (146 - s2) + 255.4 / (41 - s2)
    dry = sea * p * (1 + (1.049 - 0.0157 * t) * 1e-6 * p) / (720.883 * (1 + 0.003661 * t))
    wet = (0.0624 - 0.000680 * s2) / (1 + 0.003661 * t) * f
    return (dry - wet) * 1e-6


for case in json.load(open(sys.argv[1])):
    place = EarthLocation.from_geodetic(case["longitude"] * u.deg, case["latitude"] * u.deg, case["height_m"] * u.m)
    star = SkyCoord(case["ra"] * u.deg, case["dec"] * u.deg, frame="icrs")
    formula, theirs = [], []
    for seconds in (case["seconds"] - SPAN, case["seconds"] + SPAN):
        at = Time(case["start"].rstrip("Z"), scale="utc") + seconds * u.s
        geometric = star.transform_to(AltAz(obstime=at, location=place))
        above = SkyCoord(az=geometric.az, alt=geometric.alt + 0.01 * u.deg, frame=AltAz(obstime=at, location=place)).icrs
        q = star.position_angle(above).rad
        towards = np.array([np.sin(q), np.cos(q)])

        def altitude(nm):
            air = dict(pressure=case["hpa"] * u.hPa, temperature=case["celsius"] * u.deg_C, relative_humidity=0.5)
            return star.transform_to(AltAz(obstime=at, location=place, obswl=nm * u.nm, **air)).alt.deg

        tan = np.tan(np.radians(90 - altitude(550)))
        formula.append(ARCSEC * (refractivity(case, case["nm"]) - refractivity(case, case["guide_nm"])) * tan * towards)
        theirs.append(3600 * (altitude(case["nm"]) - altitude(case["guide_nm"])) * towards)
    for places in formula, theirs:
        print(float(np.hypot(*(places[1] - places[0])) * 3600 / (2 * SPAN)))
