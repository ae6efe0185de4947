"""Find the stars and emission lines of reduced cubes through astropy's WCS.

usage: reduce_wcs.py CASES.json; each case: name, cube (FITS), scene (YAML), ra
and dec (degrees, of the target), lsf_voxels (FWHM of a line, about). One line a
case is printed, JSON: the largest distances found, in voxels.

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
Lines whose windows overlap are fitted together; of blends closer than 0.8 FWHM
no fit can part the shifts, and they get one in common. Lines of the sky are
fitted in the mean of all good places, lines of a source where it is bright.
"""

import json
import sys

import astropy.units as u
import numpy as np
import yaml
from astropy.coordinates import CartesianRepresentation, SkyCoord
from astropy.io import fits
from astropy.wcs import WCS
from astropy.wcs.utils import proj_plane_pixel_scales
from scipy.optimize import least_squares
from scipy.special import ndtr

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


class Cube:
    def __init__(self, case):
        with fits.open(case["cube"]) as hdus:
            header = hdus["SIGNAL"].header
            self.check_units(hdus)
            signal = np.array(hdus["SIGNAL"].data, float)
            good = (hdus["FLAGS"].data & FLAGBAD) == 0
            variance = np.array(hdus["VARIANCE"].data, float)
        self.wcs = WCS(header)
        assert list(self.wcs.wcs.ctype) == ["RA---TAN", "DEC--TAN", "WAVE"], list(self.wcs.wcs.ctype)
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


class Emission:
    """The lines of a source, or of the sky (source None)."""

    def __init__(self, cube, case, scene, source):
        self.lines = [l["wavelength_nm"] for l in (source or scene["sky"]).get("lines", [])]
        places = np.isfinite(cube.white)
        if source is None:
            weight = cube.weight * places
            with np.errstate(invalid="ignore", divide="ignore"):
                # One spectrum: the plain mean, so that no line is weighed down.
                n = (weight > 0).sum(axis=(1, 2))
                self.spectra = (np.nansum(np.where(weight > 0, cube.signal, 0), axis=(1, 2)) / n)[None, :]
            self.factor = np.ones(1)
            return
        dx, dy = cube.east - source["east_arcsec"], cube.north - source["north_arcsec"]
        r, seeing = np.hypot(dx, dy), case["seeing"]
        if source["kind"] == "ring":
            places &= abs(r - source["radius_arcsec"]) < 0.4 * np.hypot(source["width_arcsec"], seeing)
        else:
            places &= r < source.get("radius_arcsec", 0) + 0.5 * seeing
        at = np.flatnonzero(places)
        at = at[:: max(1, at.size // case.get("places", 150))]
        spectra = cube.signal.reshape(cube.signal.shape[0], -1)[:, at].T
        velocity = source.get("velocity", {})
        pa = np.radians(velocity.get("pa_deg", 0))
        along = (dx * np.sin(pa) + dy * np.cos(pa)).ravel()[at]
        b = (velocity.get("systemic_km_s", 0) + velocity.get("gradient_km_s_arcsec", 0) * along) / LIGHT_KM_S
        self.spectra, self.factor = spectra, np.sqrt((1 + b) / (1 - b))

    def groups(self, cube):
        """Lines whose windows overlap, and which shift each of them has."""
        inside = sorted(l for l in self.lines if WINDOW / 2 < cube.voxel(l * self.factor.mean()) < cube.nm.size - 1 - WINDOW / 2)
        groups = []
        for line in inside:
            at = cube.voxel(line * self.factor.mean())
            if groups and at - groups[-1][-1][1] < WINDOW:
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
    predicted = [cube.voxel(line * factor) for line, _ in group]

    def design(p):
        sigma = p[-1]
        columns = [np.ones((len(spectra), l.size)), np.broadcast_to((l - l.mean()) / l.size, (len(spectra), l.size))]
        for k, at in zip(which, predicted):
            d = l[None, :] - at[:, None] - p[k]
            columns.append(ndtr((d + 0.5) / sigma) - ndtr((d - 0.5) / sigma))
        return np.stack(columns, axis=2)

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
        "line": max(abs(s) for _, _, s in lines), "all_stars": stars, "all_lines": lines,
    }


def main():
    with open(sys.argv[1]) as f:
        for case in json.load(f):
            print(json.dumps(check(case)))


main()
