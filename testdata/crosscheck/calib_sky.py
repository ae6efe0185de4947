"""Zenith distances by astropy, without and with refraction (1010 hPa, 10 C, dry,
0.55 um), of 200 places above the horizon at random times and sites, as JSON.
Seed fixed; built-in Earth orientation only (no download; UT1-UTC from the bundled
table or 0)."""
import json
import warnings

import astropy.units as u
import numpy as np
from astropy.coordinates import AltAz, EarthLocation, SkyCoord
from astropy.time import Time
from astropy.utils import iers

iers.conf.auto_download = False
iers.conf.iers_degraded_accuracy = "warn"
warnings.simplefilter("ignore")

rng = np.random.default_rng(1)
n = 500
seconds = rng.integers(0, 16000 * 86400, n)  # 1995 to 2038
time = Time((Time("1995-01-01T00:00:00", scale="utc") + seconds * u.s).isot, scale="utc")
stamps = [t[:19] for t in time.isot]
time = Time(stamps, scale="utc")
ra = rng.uniform(0, 360, n)
dec = np.degrees(np.arcsin(rng.uniform(-1, 1, n)))
lat, lon = rng.uniform(-75, 75, n), rng.uniform(-180, 180, n)
place = SkyCoord(ra * u.deg, dec * u.deg, frame="icrs")
site = EarthLocation.from_geodetic(lon * u.deg, lat * u.deg, 2000 * u.m)
plain = place.transform_to(AltAz(obstime=time, location=site))
air = place.transform_to(AltAz(obstime=time, location=site, pressure=1010 * u.hPa,
                               temperature=10 * u.deg_C, relative_humidity=0, obswl=0.55 * u.um))
rows = [{"UTC": stamps[i], "RA": ra[i], "Dec": dec[i], "Latitude": lat[i], "LongitudeEast": lon[i],
         "Zenith": 90 - float(plain.alt.deg[i]), "Apparent": 90 - float(air.alt.deg[i])}
        for i in np.flatnonzero(plain.alt.deg > 0)]
print(json.dumps(rows[:200]))
