"""Print, for each sequence folder, the secant of the zenith distance of the
target at the start of the first science step and at the end of the last, and
the whole time in minutes, computed with astropy from the folder's files.

usage: plan_airmass.py DIR...
"""
import pathlib
import sys
import warnings

import astropy.units as u
import yaml
from astropy.coordinates import AltAz, EarthLocation, SkyCoord
from astropy.io import fits
from astropy.time import Time, TimeDelta
from astropy.utils import iers

# The tables of the Earth's rotation end before the demo's date; their error is
# far below what is checked, and nothing may be downloaded.
iers.conf.auto_download = False
iers.conf.iers_degraded_accuracy = "ignore"
warnings.simplefilter("ignore")

for name in sys.argv[1:]:
    folder = pathlib.Path(name)
    profile = yaml.safe_load((folder / "profile.yaml").read_text())
    target = yaml.load((folder / "target.yaml").read_text(), yaml.BaseLoader)
    site = profile["site"]
    place = EarthLocation(lon=site["longitude_east_deg"] * u.deg, lat=site["latitude_deg"] * u.deg, height=site["height_m"] * u.m)
    field = SkyCoord(float(target["ra_deg"]) * u.deg, float(target["dec_deg"]) * u.deg)
    steps = fits.getdata(folder / "sequence.fits", "STEPS")
    seconds, first, last = 0.0, None, None
    for step in steps:
        if step["KIND"].strip() == "science" and first is None:
            first = seconds
        seconds += step["EXPTIME"]
        if step["KIND"].strip() == "science":
            last = seconds
        seconds += profile["detector"]["read_s"]
    start = Time(target["start_utc"].rstrip("Z"), scale="utc")
    for at in first, last:
        frame = AltAz(obstime=start + TimeDelta(at, format="sec"), location=place)
        print(float(field.transform_to(frame).secz))
    print(seconds / 60)
