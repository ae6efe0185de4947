"""The light of a reference star's frame, against an integral.

usage: rehearse_refstar.py SEQUENCE NIGHT

A perfect night without noise and sky. Prints electrons in the frame and expected, the
header's airmass and astropy's, the rms of the star's row by wavelength against where
refraction should put it (px), the offset along x of the band's place (px), and how far
the rows reach from end to end (px).
"""
import sys

import astropy.units as u
import numpy as np
import yaml
from astropy.coordinates import AltAz, EarthLocation, SkyCoord
from astropy.io import fits
from astropy.time import Time
from astropy.utils import iers

iers.conf.auto_download = False
iers.conf.iers_degraded_accuracy = "warn"

H, C, K = 6.62607015e-34, 299792458.0, 1.380649e-23
ARCSEC = 206264.80624709636
sequence, night = sys.argv[1:3]
profile = yaml.safe_load(open(sequence + "/profile.yaml"))
target = yaml.safe_load(open(sequence + "/target.yaml"))
scene = yaml.safe_load(open(night + "/truth/scene.yaml"))
site, dmd, spec, air, star = profile["site"], profile["dmd"], profile["spectrograph"], scene["atmosphere"], scene["refstar"]
plan = target["calibration"]["refstar"]
place = EarthLocation.from_geodetic(site["longitude_east_deg"] * u.deg, site["latitude_deg"] * u.deg, site["height_m"] * u.m)
with fits.open(sequence + "/sequence.fits") as f:
    step = int(next(r["STEP"] for r in f["STEPS"].data if r["KIND"].strip() == "refstar"))
    elements = [(r["FIRST"], r["LAST"]) for r in sorted(f["ELEMENTS"].data, key=lambda r: r["ELEMENT"]) if r["ELEMENT"] >= 0]


def read(n):
    with fits.open(f"{night}/f{n:05d}.fits") as f:
        hdu = next(h for h in f if h.data is not None)
        return hdu.data.astype(float), hdu.header


data, header = read(step)
assert header["RA"] == plan["ra_deg"] and header["DEC"] == plan["dec_deg"] and header["OBJECT"] == plan["name"]
assert header["KIND"] == "refstar" and header["EXPTIME"] == plan["dwell_s"]
image = (data - read(1)[0])[:, : profile["detector"]["columns"]] * profile["detector"]["amplifiers"][0]["gain_e_per_adu"]

middle = Time(header["DATE-OBS"], scale="utc") + header["EXPTIME"] / 2 * u.s
at = SkyCoord(header["RA"] * u.deg, header["DEC"] * u.deg, frame="icrs")
frame = AltAz(obstime=middle, location=place)
flat = at.transform_to(frame)
# The refraction of air masses is that of 10 C and 1010 hPa.
z = 90 - at.transform_to(AltAz(obstime=middle, location=place, pressure=1010 * u.hPa, temperature=10 * u.deg_C, obswl=0.56 * u.um)).alt.deg
airmass = 1 / (np.cos(np.radians(z)) + 0.50572 * (96.07995 - z) ** -1.6364)
q = at.position_angle(SkyCoord(az=flat.az, alt=flat.alt + 0.01 * u.deg, frame=frame).icrs).rad


def table(rows, value, nm, **beyond):
    return np.interp(nm, [r["wavelength_nm"] for r in rows], [r[value] for r in rows], **beyond)


def photons(nm):
    """Photons s-1 m-2 nm-1 of a black body of the star's AB magnitude."""
    shape = lambda l: l**-4.0 / np.expm1(H * C / (l * 1e-9 * K * star["temperature_k"]))
    zero = 3631e-26 * 10 ** (-0.4 * star["ab_mag"]) / (H * star["at_nm"])
    return zero * shape(nm) / shape(star["at_nm"])


def refractivity(nm):
    p, f, t, s2 = air["pressure_hpa"] * 0.750061683, air["water_hpa"] * 0.750061683, air["temperature_c"], (1000.0 / nm) ** 2
    sea = 64.328 + 29498.1 / (146 - s2) + 255.4 / (41 - s2)
    return 1e-6 * (sea * p * (1 + (1.049 - 0.0157 * t) * 1e-6 * p) / (720.883 * (1 + 0.003661 * t)) - (0.0624 - 0.000680 * s2) / (1 + 0.003661 * t) * f)


catalogue = np.loadtxt(night + "/truth/refstar_flux.csv", delimiter=",", skiprows=1)
energy = photons(catalogue[:, 0]) * H * C / (catalogue[:, 0] * 1e-9) * 1e18
assert catalogue[0, 0] <= 390 and catalogue[-1, 0] >= 910 and np.all(np.diff(catalogue[:, 0]) == 1)
assert np.abs(catalogue[:, 1] / energy - 1).max() < 1e-7, "truth/refstar_flux.csv"

nm = np.arange(380, 920, 0.01)
area = np.pi / 4 * profile["telescope"]["diameter_m"] ** 2 * (1 - profile["telescope"]["obscured_fraction"])
efficiency = table(profile["telescope"]["throughput"], "fraction", nm) * table(spec["throughput"], "fraction", nm, left=0, right=0)
left = 10 ** (-0.4 * table(air["extinction"], "mag_per_airmass", nm) * airmass)
density = area * photons(nm) * efficiency * left * header["EXPTIME"]
expected = density.sum() * 0.01

bend = ARCSEC * (refractivity(nm) - refractivity(air["guide_nm"])) * np.tan(np.radians(z))
east, north, t = bend * np.sin(q), bend * np.cos(q), np.radians(target["rotang_deg"])
du = dmd["parity"] * (-east * np.cos(t) + north * np.sin(t)) / dmd["arcsec_per_mirror"]
dw = (east * np.sin(t) + north * np.cos(t)) / dmd["arcsec_per_mirror"]
first, last = plan["elements"]
middle_u = (elements[first][0] + elements[last][1]) / 2 - (elements[0][0] + elements[-1][1]) / 2
l, d = nm - spec["center_nm"], spec["dispersion_px_per_nm"]
x = spec["x_center_px"] + spec["u_step_px"] * (middle_u + du) + l * (d[0] + l * (d[1] + l * d[2]))
y = spec["y_center_px"] + spec["w_step_px"] * dw
for _ in range(4):
    trace = spec["trace_tilt"] * (x - spec["x_center_px"]) + spec["trace_curve_per_px"] * (x - spec["x_center_px"]) ** 2
    q_px = y + trace - spec["y_center_px"]
    x = spec["x_center_px"] + spec["u_step_px"] * (middle_u + du) + l * (d[0] + l * (d[1] + l * d[2])) + spec["slit_tilt"] * q_px + spec["smile_per_px"] * q_px**2
y = y + trace

# The star's row by column, where there is light; expected rows are smooth over the spot.
sums = image.sum(0)
rows = (image * np.arange(image.shape[0])[:, None]).sum(0) / np.maximum(sums, 1e-9)
columns = np.arange(image.shape[1])
lit = (columns > x[np.searchsorted(nm, 410)]) & (columns < x[np.searchsorted(nm, 890)])
off = rows[lit] - np.interp(columns[lit], x, y)
# The light's first moment along x.
shift = (sums * columns).sum() / sums.sum() - (density * x).sum() / density.sum()
print(image.sum(), expected, header["AIRMASS"], airmass, np.sqrt((off**2).mean()), shift, np.ptp(np.interp(columns[lit], x, y - trace)))
