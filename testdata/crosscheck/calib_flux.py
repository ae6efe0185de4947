"""Flux tables in every unit that mirrorloom reads, with the answers of astropy and numpy,
as JSON: text of the CSV, fluxes in aW m-2 nm-1 at the rows, means over a few ranges
(trapezoids over a fine grid of the straight lines between rows). Seed fixed."""
import json

import astropy.units as u
import numpy as np

rng = np.random.default_rng(3)
target = u.Unit("1e-18 W m-2 nm-1")
units = {
    "flux_aw_m2_nm": (target, 1.0),
    "flux_w_m2_nm": (u.W / u.m**2 / u.nm, 1e-18),
    "flux_erg_s_cm2_a": (u.erg / u.s / u.cm**2 / u.AA, 1e-16),
    "flux_jy": (u.Jy, 1e-3),
}
cases = []
for name in [*units, "ab_mag"]:
    nm = np.sort(rng.uniform(350, 1000, 40)).round(3)
    if name == "ab_mag":
        values = rng.uniform(10, 18, 40).round(3)
        # mirrorloom's zero point is 3631 Jy.
        flux = (3631 * 10 ** (-0.4 * values) * u.Jy).to_value(target, u.spectral_density(nm * u.nm))
    else:
        unit, scale = units[name]
        values = np.array([float(f"{v:.6g}") for v in rng.uniform(1, 9, 40) * scale])
        flux = (values * unit).to_value(target, u.spectral_density(nm * u.nm))
    text = f"wavelength_nm,{name}\n" + "".join(f"{a},{b}\n" for a, b in zip(nm, values))
    means = []
    for _ in range(20):
        a, b = np.sort(rng.uniform(nm[0], nm[-1], 2))
        x = np.union1d(np.linspace(a, b, 1001), nm[(nm > a) & (nm < b)])
        means.append([a, b, float(np.trapz(np.interp(x, nm, flux), x) / (b - a))])
    cases.append({"Text": text, "Flux": list(flux), "Means": means})
print(json.dumps(cases))
