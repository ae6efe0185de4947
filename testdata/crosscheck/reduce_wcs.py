"""Find the stars and emission lines of reduced cubes through astropy's WCS.

usage: reduce_wcs.py CASES.json; each case: name, cube (FITS), scene (YAML), ra
and dec (degrees, of the target), lsf_voxels (FWHM of a line, about), and where they
differ from WAVE and TOPOCENT ctype (of the wavelengths) and observer (latitude, east,
height, middles: UTC of the exposures; for SPECSYS = BARYCENT). One line a
case is printed, JSON: the largest distances found, in voxels, and velocity_off, VELOSYS
less that of astropy's ephemeris, m/s.

Where things must lie is worked out from the scene alone. A star's east and north
offsets lie in the plane of the sky that touches the sphere at the target: a unit
vector is the target's plus the offsets along east and north, normalised. A line's
wavelength is that of the scene times sqrt((1+b)/(1-b)), b = v/c, with the scene's
velocity at the voxel's own place on the sky.

Stars. A voxel holds the integral of a star's image over the element and, through
the spectrograph's spread, over the row: that response is symmetric, so that the
centre of a symmetric function fitted to the voxels is the star's own, whatever
the pixel phase. A plain centre of mass would not do: the field's edge and the
nebula behind pull it. Fitted is a Gaussian of free widths over a polynomial of
second degree, to the good voxels within 2.2 FWHM, so that an image cut by the
edge counts with what is left of it.

Lines. Every line is a Gaussian integrated over the voxel, at the predicted
wavelength of each place plus one shift for all places, which is what is fitted:
amplitudes and a sloping continuum are free at each place, the width is common.
Lines whose windows overlap are fitted together; no fit can part blends closer than
0.8 FWHM: they get one shift in common, and the scene's ratio of fluxes. Lines of a source are
fitted where it is bright, with the sky's lines beside them held at their
wavelengths; lines of the sky in the mean of all places where no such source is.
"""

import json
import sys

import astropy.units as u
import numpy as np
import yaml
from astropy.coordinates import CartesianRepresentation, EarthLocation, SkyCoord
from astropy.io import fits
from astropy.time import Time
from astropy.utils import iers
from astropy.wcs import WCS
from astropy.wcs.utils import proj_plane_pixel_scales
from scipy.optimize import least_squares
from scipy.special import ndtr

iers.conf.auto_download = False
LIGHT_KM_S = 299792.458
FLAGBAD = 127
WINDOW = 8  # voxels on each side of a line


def tangent_vectors(ra, dec):
    a, d = np.radians([ra, dec])
    middle = np.array([np.cos(d) * np.cos(a), np.cos(d) * np.sin(a), np.sin(d)])
    east = np.array([-np.sin(a), np.cos(a), 0])
    north = np.array([-np.sin(d) * np.cos(a), -np.sin(d) * np.sin(a), np.cos(d)])
    return middle, east, north


def place(ra, dec, east, north):
    m, e, n = tangent_vectors(ra, dec)
    v = m + np.radians(east / 3600) * e + np.radians(north / 3600) * n
    return SkyCoord(CartesianRepresentation(*v), frame="icrs")


def offsets(ra, dec, sky):
    """East and north in the tangent plane, arc seconds."""
    m, e, n = tangent_vectors(ra, dec)
    v = np.moveaxis(sky.icrs.cartesian.xyz.value, 0, -1)
    depth = v @ m
    return np.degrees((v @ e) / depth) * 3600, np.degrees((v @ n) / depth) * 3600


def vacuum(air):
    """Ciddor 1996, equation 1, solved for the vacuum wavelength."""
    nm = air
    for _ in range(8):
        s = (1000 / nm) ** 2
        nm = air * (1 + 1e-8 * (5792105 / (238.0185 - s) + 167917 / (57.362 - s)))
    return nm


def barycentric(case):
    """Wavelength at the barycentre over wavelength observed, mean over the exposures."""
    o = case["observer"]
    site = EarthLocation.from_geodetic(o["east"] * u.deg, o["latitude"] * u.deg, o["height"] * u.m)
    target = SkyCoord(case["ra"] * u.deg, case["dec"] * u.deg, frame="icrs")
    velocity = target.radial_velocity_correction("barycentric", obstime=Time(o["middles"], scale="utc"), location=site)
    return float(np.mean(1 + velocity.to_value(u.km / u.s) / LIGHT_KM_S))


class Cube:
    def __init__(self, case):
        with fits.open(case["cube"]) as hdus:
            header = hdus["SIGNAL"].header
            self.check_units(hdus)
            signal = np.array(hdus["SIGNAL"].data, float)
            good = (hdus["FLAGS"].data & FLAGBAD) == 0
            variance = np.array(hdus["VARIANCE"].data, float)
        self.wcs = WCS(header)
        ctype = case.get("ctype", "WAVE")
        assert list(self.wcs.wcs.ctype) == ["RA---TAN", "DEC--TAN", ctype], list(self.wcs.wcs.ctype)
        self.signal = np.where(good, signal, np.nan)
        self.weight = np.where(good, 1 / np.where(good, variance, 1), 0)
        with np.errstate(invalid="ignore"):
            n = good.sum(axis=0)
            self.white = np.where(n > 0.5 * n.max(), np.nansum(self.signal, axis=0) / np.maximum(n, 1), np.nan)
        rows, columns = np.indices(self.white.shape)
        sky = self.wcs.celestial.pixel_to_world(columns, rows)
        self.east, self.north = offsets(case["ra"], case["dec"], sky)
        l = np.arange(signal.shape[0])
        # Wavelength in nm of voxels from 0, asked of the whole WCS at the middle.
        world = self.wcs.all_pix2world(np.full(l.size, columns.mean()), np.full(l.size, rows.mean()), l, 0)[2]
        self.nm = (world * self.wcs.wcs.cunit[2]).to_value(u.nm)
        if ctype.startswith("AWAV"):
            self.nm = vacuum(self.nm)
        self.velocity_off = 0.0
        # From the cube's standard of rest to that of the observatory.
        assert header["SPECSYS"] == ("BARYCENT" if "observer" in case else "TOPOCENT"), header["SPECSYS"]
        if "observer" in case:
            factor = barycentric(case)
            velosys = 299792458.0 * (factor**-2 - 1) / (factor**-2 + 1)
            self.velocity_off = header["VELOSYS"] - velosys
            self.nm = self.nm / factor
        self.voxel = lambda nm: np.interp(nm, self.nm, l) + (nm - np.clip(nm, self.nm[0], self.nm[-1])) / (self.nm[1] - self.nm[0])

    @staticmethod
    def check_units(hdus):
        for name, want in ("SIGNAL", u.ct), ("VARIANCE", u.ct**2):
            unit = u.Unit(hdus[name].header["BUNIT"], format="fits")
            assert unit == want, f"{name}: {unit}"
        for name in "SIGNAL", "VARIANCE", "FLAGS", "SCALE":
            for axis, kind in (1, u.deg), (2, u.deg), (3, u.m):
                unit = u.Unit(hdus[name].header[f"CUNIT{axis}"], format="fits")
                assert unit.is_equivalent(kind), f"{name}: CUNIT{axis} {unit}"


def star_distance(cube, case, star):
    """How far the fitted centre of a star lies from its place, in voxels."""
    sky = place(case["ra"], case["dec"], star["east_arcsec"], star["north_arcsec"])
    x0, y0 = (float(v) for v in cube.wcs.celestial.world_to_pixel(sky))
    rows, columns = np.indices(cube.white.shape)
    arcsec = np.hypot(cube.east - star["east_arcsec"], cube.north - star["north_arcsec"])
    inside = np.isfinite(cube.white) & (arcsec < 2.2 * case["seeing"])
    x, y, data = columns[inside] - x0, rows[inside] - y0, cube.white[inside]
    scale = 3600 * proj_plane_pixel_scales(cube.wcs.celestial)
    sigma = case["seeing"] / 2.3548

    def residual(p):
        dx, dy, sx, sy = p
        shape = np.exp(-0.5 * ((x - dx) / sx) ** 2 - 0.5 * ((y - dy) / sy) ** 2)
        a = np.stack([shape, np.ones_like(x), x, y, x * x, x * y, y * y], axis=1)
        return a @ np.linalg.lstsq(a, data, rcond=None)[0] - data

    fit = least_squares(residual, [0, 0, sigma / scale[0], sigma / scale[1]], x_scale=[0.1, 0.1, 1, 1])
    return float(fit.x[0]), float(fit.x[1])


def distance(cube, source):
    return np.hypot(cube.east - source["east_arcsec"], cube.north - source["north_arcsec"])


def bright(cube, case, source):
    """The places where a source of lines is bright."""
    r, seeing = distance(cube, source), case["seeing"]
    if source["kind"] == "ring":
        return abs(r - source["radius_arcsec"]) < 0.4 * np.hypot(source["width_arcsec"], seeing)
    return r < source.get("radius_arcsec", 0) + 0.5 * seeing


def clear(cube, case, source):
    """The places out of its light."""
    size = source.get("radius_arcsec", 0) * (4 if source["kind"] == "galaxy" else 1)
    return distance(cube, source) > size + 1.5 * np.hypot(source.get("width_arcsec", 0), case["seeing"])


class Emission:
    """The lines of a source, or of the sky (source None)."""

    def __init__(self, cube, case, scene, source):
        of_sky = scene.get("sky", {}).get("lines", [])
        sky = [l["wavelength_nm"] for l in of_sky]
        # PyYAML reads 3e-19, without a dot, as text.
        self.flux = {l["wavelength_nm"]: float(l.get("flux_w_m2", l.get("flux_w_m2_arcsec2"))) for l in (source["lines"] if source else of_sky)}
        places = np.isfinite(cube.white)
        if source is None:
            self.lines, self.beside, self.factor = sky, [], np.ones(1)
            for other in scene.get("sources", []):
                if other.get("lines"):
                    places &= clear(cube, case, other)
            assert places.sum() > 100, "too few places without a nebula"
            at = np.where(places, cube.signal, np.nan)
            # One spectrum: the plain mean, so that no line is weighed down.
            self.spectra = np.nanmean(at.reshape(len(at), -1), axis=1)[None, :]
            return
        self.lines, self.beside = [l["wavelength_nm"] for l in source["lines"]], sky
        at = np.flatnonzero(places & bright(cube, case, source))
        at = at[:: max(1, at.size // 1500)]
        self.spectra = cube.signal.reshape(cube.signal.shape[0], -1)[:, at].T
        velocity = source.get("velocity", {})
        pa = np.radians(velocity.get("pa_deg", 0))
        dx, dy = cube.east - source["east_arcsec"], cube.north - source["north_arcsec"]
        along = (dx * np.sin(pa) + dy * np.cos(pa)).ravel()[at]
        b = (velocity.get("systemic_km_s", 0) + velocity.get("gradient_km_s_arcsec", 0) * along) / LIGHT_KM_S
        self.factor = np.sqrt((1 + b) / (1 - b))

    def groups(self, cube):
        """Lines whose windows overlap, and which shift each of them has."""
        inside = sorted(l for l in self.lines if WINDOW / 2 < cube.voxel(l * self.factor.mean()) < cube.nm.size - 1 - WINDOW / 2)
        groups = []
        for line in inside:
            at = cube.voxel(line * self.factor.mean())
            if groups and at - groups[-1][-1][1] < 2 * WINDOW:
                groups[-1].append((line, at))
            else:
                groups.append([(line, at)])
        return groups


def line_shifts(cube, case, emission, group):
    """The shift in voxels of each line of a group from its wavelength."""
    fwhm = case["lsf_voxels"]
    which, shifts = [], 0
    for i, (_, at) in enumerate(group):
        if i == 0 or at - group[i - 1][1] >= 0.8 * fwhm:
            shifts += 1
        which.append(shifts - 1)
    low = max(0, int(np.floor(group[0][1] - WINDOW)))
    high = min(cube.nm.size, int(np.ceil(group[-1][1] + WINDOW)) + 1)
    l = np.arange(low, high)
    spectra = emission.spectra[:, low:high]
    whole = np.isfinite(spectra).all(axis=1)
    spectra, factor = spectra[whole], emission.factor[whole]
    if len(spectra) == 0:
        return None
    # A place counts by its light: the noise grows with it.
    spectra = spectra / np.sqrt(np.maximum(spectra.mean(axis=1), 1e-3 * spectra.mean()))[:, None]
    predicted = [(emission.flux[line], k, cube.voxel(line * factor)) for (line, _), k in zip(group, which)]
    held = [np.full(len(spectra), at) for at in map(cube.voxel, emission.beside) if low - 3 < at < high + 2]
    strongest = max(flux for flux, _, _ in predicted)

    def profile(at, sigma):
        d = l[None, :] - at[:, None]
        return ndtr((d + 0.5) / sigma) - ndtr((d - 0.5) / sigma)

    def design(p):
        sigma = p[-1]
        columns = [np.ones((len(spectra), l.size)), np.broadcast_to((l - l.mean()) / l.size, (len(spectra), l.size))]
        templates = np.zeros((shifts, len(spectra), l.size))
        for flux, k, at in predicted:
            templates[k] += flux / strongest * profile(at + p[k], sigma)
        return np.stack(columns + list(templates) + [profile(at, sigma) for at in held], axis=2)

    def residual(p):
        a = design(p)
        at = np.swapaxes(a, 1, 2)
        coef = np.linalg.solve(at @ a + 1e-12 * np.eye(a.shape[2]), (at @ spectra[:, :, None]))
        return ((a @ coef)[:, :, 0] - spectra).ravel()

    start = np.append(np.zeros(shifts), fwhm / 2.3548)
    fit = least_squares(residual, start, x_scale=np.append(np.full(shifts, 0.1), 0.3), diff_step=1e-4,
                        bounds=(np.append(np.full(shifts, -3), 0.7), np.append(np.full(shifts, 3), 4)))
    return [(line, float(fit.x[k])) for (line, _), k in zip(group, which)]


def check(case):
    with open(case["scene"]) as f:
        scene = yaml.safe_load(f)
    case["seeing"] = scene["seeing_fwhm_arcsec"]
    cube = Cube(case)
    stars, lines = [], []
    for source in scene.get("sources", []):
        if source["kind"] == "star":
            stars.append(star_distance(cube, case, source))
    for source in [None] + [s for s in scene.get("sources", []) if s.get("lines")]:
        emission = Emission(cube, case, scene, source)
        for group in emission.groups(cube):
            found = line_shifts(cube, case, emission, group)
            assert found, f"{case['name']}: no place shows the lines {group}"
            lines += [("sky" if source is None else source["kind"], line, shift) for line, shift in found]
    return {
        "name": case["name"], "stars": len(stars), "lines": len(lines),
        "star_x": max(abs(x) for x, _ in stars), "star_y": max(abs(y) for _, y in stars),
        "line": max(abs(s) for _, _, s in lines), "velocity_off": cube.velocity_off, "all_stars": stars, "all_lines": lines,
    }


def main():
    with open(sys.argv[1]) as f:
        for case in json.load(f):
            print(json.dumps(check(case)))


main()
