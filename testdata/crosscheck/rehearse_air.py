"""What refraction and extinction did to frames, against astropy.

usage: rehearse_air.py SEQUENCE CLEAN AIRY

Two perfect nights without noise of one sequence, the second with an atmosphere; a
scene of one star with narrow lines. In each all-on frame every line's flux and centroid
are measured in a window and compared. Prints a line a frame and line: step, wavelength,
dx and dy measured, dx and dy expected, transmission measured and expected, airmass of
the header and of astropy, differential refraction by Filippenko's formula and by
astropy's own (arcsec).

Expected shifts follow from the zenith's direction by astropy, the published formula of
the air's index written out here anew, and the geometry of DEVELOPERS and the profile.
"""
import sys
from datetime import timedelta

import astropy.units as u
import numpy as np
import yaml
from astropy.coordinates import AltAz, EarthLocation, SkyCoord
from astropy.io import fits
from astropy.time import Time
from astropy.utils import iers

iers.conf.auto_download = False
iers.conf.iers_degraded_accuracy = "warn"

ARCSEC = 206264.80624709636
sequence, clean, airy = sys.argv[1:4]
profile = yaml.safe_load(open(sequence + "/profile.yaml"))
target = yaml.safe_load(open(sequence + "/target.yaml"))
scene = yaml.safe_load(open(airy + "/truth/scene.yaml"))
site, dmd, spec, air = profile["site"], profile["dmd"], profile["spectrograph"], scene["atmosphere"]
guide = air.get("guide_nm", spec["center_nm"])
hpa, celsius, water = air["pressure_hpa"], air["temperature_c"], air["water_hpa"]
place = EarthLocation.from_geodetic(site["longitude_east_deg"] * u.deg, site["latitude_deg"] * u.deg, site["height_m"] * u.m)
star = scene["sources"][0]


def refractivity(nm):
    """n - 1 by Filippenko 1982, equations 1 to 3; millimetres of mercury."""
    p, f, t = hpa * 0.750061683, water * 0.750061683, celsius
    s2 = (1000.0 / nm) ** 2
    sea = 64.328 + 29498.1 / (146 - s2) + 255.4 / (41 - s2)
    dry = sea * p * (1 + (1.049 - 0.0157 * t) * 1e-6 * p) / (720.883 * (1 + 0.003661 * t))
    wet = (0.0624 - 0.000680 * s2) / (1 + 0.003661 * t) * f
    return (dry - wet) * 1e-6


def kasten_young(z):
    return 1 / (np.cos(np.radians(z)) + 0.50572 * (96.07995 - z) ** -1.6364)


def electrons(night, step):
    def read(n):
        with fits.open(f"{night}/f{n:05d}.fits") as f:
            hdu = next(h for h in f if h.data is not None)
            return hdu.data.astype(float), hdu.header
    data, header = read(step)
    return data - read(1)[0], header


def measure(image, x0):
    xs = np.arange(int(round(x0)) - 14, int(round(x0)) + 15)
    cut = image[:, xs]
    total = cut.sum()
    return total, (cut.sum(0) * xs).sum() / total, (cut.sum(1) * np.arange(image.shape[0])).sum() / total


def slant(y):
    return (y - spec["y_center_px"]) * (spec["slit_tilt"] + spec["smile_per_px"] * (y - spec["y_center_px"]))


def trace(x):
    return (x - spec["x_center_px"]) * (spec["trace_tilt"] + spec["trace_curve_per_px"] * (x - spec["x_center_px"]))


def column(nm):
    l, d = nm - spec["center_nm"], spec["dispersion_px_per_nm"]
    return spec["x_center_px"] + l * (d[0] + l * (d[1] + l * d[2]))


with fits.open(sequence + "/sequence.fits") as f:
    steps = f["STEPS"].data
for row in steps:
    if row["KIND"].strip() != "all-on":
        continue
    step = int(row["STEP"])
    before, _ = electrons(clean, step)
    after, header = electrons(airy, step)
    middle = Time(header["DATE-OBS"], scale="utc") + header["EXPTIME"] / 2 * u.s
    at = SkyCoord(header["RA"] * u.deg, header["DEC"] * u.deg, frame="icrs")
    vacuum = at.transform_to(AltAz(obstime=middle, location=place))
    def apparent(nm):
        frame = AltAz(obstime=middle, location=place, pressure=hpa * u.hPa, temperature=celsius * u.deg_C, relative_humidity=0.5, obswl=nm * u.nm)
        return at.transform_to(frame).alt.deg
    # Air masses and tan z are those of the refraction at 10 C and 1010 hPa, whatever the
    # site's: at the site's own pressure they differ by 0.1 % at an air mass of 3.3.
    usual = AltAz(obstime=middle, location=place, pressure=1010 * u.hPa, temperature=10 * u.deg_C, obswl=0.56 * u.um)
    z = 90 - at.transform_to(usual).alt.deg
    # The zenith's position angle on the sky of the night.
    above = SkyCoord(az=vacuum.az, alt=vacuum.alt + 0.01 * u.deg, frame=AltAz(obstime=middle, location=place)).icrs
    q = at.position_angle(above).rad
    x = kasten_young(z)
    curve = air["extinction"]
    for line in star["lines"]:
        nm = line["wavelength_nm"]
        f0, x0, y0 = measure(before, column(nm))
        f1, x1, y1 = measure(after, column(nm))
        bend = ARCSEC * (refractivity(nm) - refractivity(guide)) * np.tan(np.radians(z))
        theirs = 3600 * (apparent(nm) - apparent(guide))
        east, north = bend * np.sin(q), bend * np.cos(q)
        t = np.radians(target["rotang_deg"])
        # +w points to ROTANG, +u a quarter turn from it, to the west at 0.
        du = dmd["parity"] * (-east * np.cos(t) + north * np.sin(t))
        dw = east * np.sin(t) + north * np.cos(t)
        scale = dmd["arcsec_per_mirror"] / (np.sqrt(2) if dmd["mounting"] == "diagonal" else 1)
        du, dw = du / scale * spec["u_step_px"], dw / scale * spec["w_step_px"]
        dx = dy = 0.0
        for _ in range(5):
            dx = du + slant(y0 + dy) - slant(y0)
            dy = dw + trace(x0 + dx) - trace(x0)
        k = np.interp(nm, [p["wavelength_nm"] for p in curve], [p["mag_per_airmass"] for p in curve])
        print(step, nm, x1 - x0, y1 - y0, dx, dy, f1 / f0, 10 ** (-0.4 * k * x), header["AIRMASS"], x, bend, theirs)
