"""Values of astropy and erfa for calib/physics, as JSON: barycentric and heliocentric
velocities (builtin ephemeris, no download), the position angle of the zenith, and
differential refraction, for random times of 1990 to 2040, places and sites.
Seed fixed."""
import json
import warnings

import astropy.units as u
import erfa
import numpy as np
from astropy.constants import c
from astropy.coordinates import AltAz, EarthLocation, SkyCoord
from astropy.time import Time
from astropy.utils import iers

iers.conf.auto_download = False
iers.conf.iers_degraded_accuracy = "warn"
warnings.simplefilter("ignore")

rng = np.random.default_rng(2)
n = 300
seconds = rng.integers(0, 50 * 365 * 86400, n)
stamps = [t[:19] for t in Time(Time("1990-01-01T00:00:00", scale="utc") + seconds * u.s).isot]
time = Time(stamps, scale="utc")
ra = rng.uniform(0, 360, n)
dec = np.degrees(np.arcsin(rng.uniform(-1, 1, n)))
lat, lon, height = rng.uniform(-75, 75, n), rng.uniform(-180, 180, n), rng.uniform(0, 5000, n)
place = SkyCoord(ra * u.deg, dec * u.deg, frame="icrs")
site = EarthLocation.from_geodetic(lon * u.deg, lat * u.deg, height * u.m)
full = place.radial_velocity_correction("barycentric", obstime=time, location=site)
helio = place.radial_velocity_correction("heliocentric", obstime=time, location=site)

# The plain projection: earth about the barycentre, plus the site about the earth.
_, earth = erfa.epv00(time.tdb.jd1, time.tdb.jd2)
_, turning = site.get_gcrs_posvel(time)
total = earth["v"] * (u.au / u.d).to(u.m / u.s) + turning.xyz.to_value(u.m / u.s).T
direction = place.cartesian.xyz.value.T
plain = np.sum(total * direction, axis=1)

# The zenith's position angle, without refraction. Near the zenith it has no meaning.
frame = AltAz(obstime=time, location=site)
here = place.transform_to(frame)
zenith = SkyCoord(AltAz(az=np.zeros(n) * u.deg, alt=np.full(n, 90) * u.deg, obstime=time, location=site)).icrs
angle = place.position_angle(zenith).wrap_at(180 * u.deg).deg

rows = [{"UTC": stamps[i], "RA": ra[i], "Dec": dec[i], "Latitude": lat[i], "LongitudeEast": lon[i], "Height": height[i],
         "Plain": plain[i], "Factor": 1 + float(full[i] / c), "Heliocentric": float(helio[i].to_value(u.m / u.s)),
         "Altitude": float(here.alt.deg[i]), "Parallactic": float(angle[i])} for i in range(n)]

# erfa.refco gives A tan z + B tan^3 z, z the apparent zenith distance.
refraction = []
for pressure, celsius, humidity in [(101325.0, 15.0, 0.0), (79495.0, 7.0, 0.5), (62000.0, 0.0, 0.2)]:
    for z in (20.0, 48.19, 60.0, 70.0):
        for nm in (360.0, 400.0, 450.0, 650.0, 900.0, 1700.0):
            tan = np.tan(np.radians(z))
            bend = [np.degrees(a * tan + b * tan**3) * 3600
                    for a, b in (erfa.refco(pressure / 100, celsius, humidity, w / 1000) for w in (nm, 550.0))]
            # Saturated vapour over water, Pa (Magnus; WMO guide 8).
            vapour = humidity * 611.2 * np.exp(17.62 * celsius / (243.12 + celsius))
            refraction.append({"Pressure": pressure, "Celsius": celsius, "Vapour": vapour, "Zenith": z, "Nm": nm,
                               "Arcsec": bend[0] - bend[1]})
print(json.dumps({"Places": rows, "Refraction": refraction}))
