"""Check the world coordinates of cubes against wcslib (through astropy) and the
words of the contract, which numpy alone turns into numbers here.

usage: product_wcs.py CASES.json; each case: cube (FITS), profile (YAML),
element_mirrors, n, ra, dec, rotang; frame (FITS word) and factor (wavelength in the
frame over wavelength observed); vacuum_nm, where mirrorloom puts the first voxels.

The words: RA, Dec of the field's centre at pixel ((n+1)/2, y_c+1); axis 1 steps
by c1 = a element_mirrors, axis 2 by c2 = a / w_step_px, where a is
arcsec_per_mirror, over sqrt 2 if the device is mounted diagonally; +axis 2 has
the position angle ROTANG, north through east; east is towards -axis 1 at
ROTANG 0 unless parity is -1; axis 3 is the wavelength of the grid in vacuum (wave) or
air (awav), spaced linearly or logarithmically (first exp(i step/first)).
Positions and angles on the sphere are the textbook formulas of spherical
trigonometry; the projection of far pixels is the inverse gnomonic one
(FITS WCS paper II, Calabretta & Greisen 2002, A&A 395, 1077, eqs. 14, 15, 55).
"""

import json
import sys

import astropy.units as u
import numpy as np
import yaml
from astropy.io import fits
from astropy.units import Unit
from astropy.wcs import WCS


def bearing(ra1, dec1, ra2, dec2):
    """Position angle in degrees and distance in arc seconds from 1 to 2."""
    a1, d1, a2, d2 = np.radians([ra1, dec1, ra2, dec2])
    east = np.cos(d2) * np.sin(a2 - a1)
    north = np.cos(d1) * np.sin(d2) - np.sin(d1) * np.cos(d2) * np.cos(a2 - a1)
    up = np.sin(d1) * np.sin(d2) + np.cos(d1) * np.cos(d2) * np.cos(a2 - a1)
    return np.degrees(np.arctan2(east, north)), np.degrees(np.arctan2(np.hypot(east, north), up)) * 3600


def unproject(ra0, dec0, east, north):
    """The inverse gnomonic projection; offsets in the tangent plane, arc seconds."""
    x, y = np.radians(np.array([east, north]) / 3600)
    d0 = np.radians(dec0)
    ra = ra0 + np.degrees(np.arctan2(x, np.cos(d0) - y * np.sin(d0)))
    dec = np.degrees(np.arctan2((np.sin(d0) + y * np.cos(d0)) * np.cos(np.radians(ra - ra0)), np.cos(d0) - y * np.sin(d0)))
    return ra % 360, dec


def air(nm):
    """Standard air of Peck & Reeder 1972, equation 2."""
    s2 = (1000 / nm) ** 2
    return nm / (1 + 1e-8 * (8060.51 + 2480990 / (132.274 - s2) + 17455.7 / (39.32957 - s2)))


def near(got, want, tolerance, what):
    off = abs(got - want)
    if "angle" in what:
        off = abs((got - want + 180) % 360 - 180)
    assert off <= tolerance, f"{what}: {got!r}, want {want!r} within {tolerance}"


def check(case):
    with open(case["profile"]) as f:
        p = yaml.safe_load(f)
    dmd, spec, grid = p["dmd"], p["spectrograph"], p["grid"]
    a = dmd["arcsec_per_mirror"] / (np.sqrt(2) if dmd["mounting"] == "diagonal" else 1)
    c1, c2 = a * case["element_mirrors"], a / spec["w_step_px"]
    t, parity = case["rotang"], dmd["parity"]
    x0, y0 = (case["n"] + 1) / 2, spec["y_center_px"] + 1
    with fits.open(case["cube"]) as hdus:
        images = [h for h in hdus[1:] if h.is_image]
        names = [h.name for h in images]
        assert names == ["SIGNAL", "VARIANCE", "FLAGS", "SCALE"], names
        for h in images:
            w = WCS(h.header)
            kind = {"wave": "WAVE", "awav": "AWAV"}[grid["axis"]] + {"linear": "", "log": "-LOG"}[grid["spacing"]]
            assert list(w.wcs.ctype) == ["RA---TAN", "DEC--TAN", kind], list(w.wcs.ctype)
            assert w.wcs.radesys == "ICRS" and w.wcs.specsys == case["frame"]
            if case["frame"] == "TOPOCENT":
                assert "VELOSYS" not in h.header
            else:
                assert w.wcs.ssysobs == "TOPOCENT"
                # A source at rest in the frame, seen by an observer who recedes from it.
                shift = (w.wcs.velosys * u.m / u.s).to(u.nm, u.doppler_relativistic(500 * u.nm)).value / 500
                near(shift, 1 / case["factor"], 1e-13, "Doppler shift of the observer")

            def sky(x, y):
                return w.wcs_pix2world([[x, y, 1]], 1)[0][:2]

            ra, dec = sky(x0, y0)
            near(ra, case["ra"], 1e-9, "RA of the centre")
            near(dec, case["dec"], 1e-9, "Dec of the centre")
            # Along the axes from the centre, a pixel is a step on the sphere to
            # the gnomonic projection's second order (1e-12 here).
            angle, distance = bearing(ra, dec, *sky(x0, y0 + 1))
            near(angle, t, 1e-4, "position angle of +axis 2")
            near(distance, c2, 1e-6, "step of axis 2")
            angle, distance = bearing(ra, dec, *sky(x0 + 1, y0))
            near(angle, t - 90 * parity, 1e-4, "position angle of +axis 1")
            near(distance, c1, 1e-6, "step of axis 1")
            # A far pixel, through the tangent plane: first along the axes, then
            # turned to east and north by the position angles above.
            dx, dy = 50.0, -70.0
            pa1, pa2 = np.radians(t - 90 * parity), np.radians(t)
            east = dx * c1 * np.sin(pa1) + dy * c2 * np.sin(pa2)
            north = dx * c1 * np.cos(pa1) + dy * c2 * np.cos(pa2)
            want = unproject(case["ra"], case["dec"], east, north)
            got = sky(x0 + dx, y0 + dy)
            near(got[0], want[0], 1e-9, "RA of a far pixel")
            near(got[1], want[1], 1e-9, "Dec of a far pixel")
            # wcslib converts the axis to metres.
            for i in (0, 1, grid["count"] - 1):
                first, step = grid["first_nm"], grid["step_nm"]
                want = first + i * step if grid["spacing"] == "linear" else first * np.exp(i * step / first)
                nm = w.wcs_pix2world([[x0, y0, i + 1]], 1)[0][2] * 1e9
                near(nm, want, 1e-9 * want, f"wavelength of voxel {i}")
            # Where mirrorloom puts a voxel in vacuum, from wcslib's wavelength: another
            # formula, so within 2.2e-5 nm.
            for i, vacuum in enumerate(case["vacuum_nm"]):
                nm = w.wcs_pix2world([[x0, y0, i + 1]], 1)[0][2] * 1e9
                if grid["axis"] == "awav":
                    near(air(vacuum), nm, 3e-5, f"wavelength in air of voxel {i}")
                else:
                    near(vacuum, nm, 1e-9 * nm, f"wavelength in vacuum of voxel {i}")
        units = [Unit(h.header["BUNIT"], format="fits") for h in images[:2]]
        assert units[0] == Unit("ct") and units[1] == Unit("ct") ** 2, units
        assert "BUNIT" not in hdus["FLAGS"].header and "BUNIT" not in hdus["SCALE"].header
        flags = hdus["FLAGS"].header
        got = [flags[f"FLAG{i:02d}"] for i in range(1, 11)]
        want = "NODATA SATURATED BADPIXEL LOWFLAT LOST PARTIAL NOMINALWAVE RESTORED SKYLINE SENTINEL".split()
        bits = [1, 2, 4, 8, 16, 32, 64, 256, 512, 1024]
        assert got == [f"{b} {n}" for b, n in zip(bits, want)], got
        assert flags["FLAGBAD"] == 127


with open(sys.argv[1]) as f:
    cases = json.load(f)
for case in cases:
    try:
        check(case)
    except AssertionError as e:
        sys.exit(f"{case}: {e}")
print(len(cases), "cubes")
