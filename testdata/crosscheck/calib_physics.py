"""Doppler factors, black bodies and AB fluxes by astropy, as JSON. Argument: the AB
zero point in Jy."""
import json
import sys

import astropy.units as u
from astropy.modeling.physical_models import BlackBody

zero = float(sys.argv[1])
rest = 500 * u.nm
doppler = [{"Velocity": v, "Factor": float(((v * u.km / u.s).to(u.nm, u.doppler_relativistic(rest)) / rest).value)}
           for v in (-200000.0, -3000.0, -1.5, 0.25, 70.0, 12000.0, 250000.0)]
planck = []
for temperature in (300.0, 3200.0, 5772.0, 40000.0):
    body = BlackBody(temperature * u.K, scale=1 * u.W / u.m**2 / u.sr / u.nm)
    for nm in (400.0, 656.46, 1000.0, 2200.0):
        energy = body(nm * u.nm).to(u.W / u.m**2 / u.sr / u.nm)
        photons = (energy * u.sr).to(u.ph / u.s / u.m**2 / u.nm, u.spectral_density(nm * u.nm))
        planck.append({"Wavelength": nm, "Temperature": temperature, "Energy": energy.value, "Photons": photons.value})
ab = []
for mag in (0.0, 12.3, 24.0):
    for nm in (380.0, 550.0, 1650.0):
        flux = zero * 10 ** (-0.4 * mag) * u.Jy
        near = u.spectral_density(nm * u.nm)
        ab.append({"Magnitude": mag, "Wavelength": nm,
                   "Photons": flux.to(u.ph / u.s / u.m**2 / u.nm, near).value,
                   "Energy": flux.to(u.W / u.m**2 / u.nm, near).value})
print(json.dumps({"Doppler": doppler, "Planck": planck, "AB": ab}))
