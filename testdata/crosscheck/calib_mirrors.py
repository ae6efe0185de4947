"""Light of mirror arrays through a pupil, by brute force, as JSON: the field on a periodic
array of tilted square mirrors is sampled, its FFT is the pattern that each direction of a beam
is spread into, and the directions that arrive in the pupil are counted on a grid. Also the
Airy figures by scipy.

Everything lies in the array's plane: sines to its normal, the pupil a circle about the axis
that the mirrors send the beam's axis to, in the plane across that axis.
"""
import json

import numpy as np
from scipy import integrate, special

TILT = np.radians(12.0)


def light(masks, nm, pitch, f_number, oversize, obscured, tilt, side=24, count=24):
    """Light through the pupil of each mask (of m x m booleans, periodic)."""
    wave = nm / 1000 / pitch  # in pitches
    r = np.sin(np.arctan(1 / (2 * f_number)))
    m = masks[0].shape[0]
    local = (np.arange(m * side) % side + 0.5) / side - 0.5
    px, py = np.meshgrid(local, local)
    # Sines of the orders of the period, relative to where the light would go without tilt.
    f = np.fft.fftfreq(m * side, 1 / side) * wave
    fx, fy = np.meshgrid(f, f)
    along, across = (fx + fy) / np.sqrt(2), (fy - fx) / np.sqrt(2)
    total, weight = np.zeros(len(masks)), 0.0
    # The phase over a mirror depends on the direction along the tilt only.
    for t in ((np.arange(count) + 0.5) / count * 2 - 1) * r:
        # Directions across the tilt: the beam's chord, less that of the obstruction.
        outer, inner = np.sqrt(r**2 - t**2), np.sqrt(max(0, obscured * r**2 - t**2))
        a = np.arcsin(t)
        slope = np.sin(a) + np.sin(2 * tilt - a)
        # In periods a mirror side; whole periods are taken off and put back as orders.
        m_side = slope / wave / np.sqrt(2)
        whole = np.round(m_side)
        field = np.exp(2j * np.pi * (m_side - whole) * (px + py))
        # A sample is a square with the same phase slope.
        box = np.sinc((fx / wave - m_side + whole) / side) * np.sinc((fy / wave - m_side + whole) / side)
        out = along + whole * wave * np.sqrt(2) - np.sin(a)
        ok = np.abs(out) < 1
        axis = np.where(ok, np.sin(np.arcsin(np.where(ok, out, 0)) - 2 * tilt), 2)
        pupil = np.sqrt(np.maximum(0, (oversize * r) ** 2 - axis**2))
        length = lambda half: np.maximum(0, np.minimum(half, pupil - across) - np.maximum(-half, -pupil - across))
        taken = np.where(pupil > 0, length(outer) - length(inner), 0)
        weight += 2 * (outer - inner)
        for i, mask in enumerate(masks):
            on = np.kron(mask, np.ones((side, side)))
            total[i] += np.sum(np.abs(np.fft.fft2(on * field) * box) ** 2 * taken) / (m * side**2) ** 2
    return total / weight


def strips(m, diagonal, mirrors, which):
    c, r = np.meshgrid(np.arange(m), np.arange(m))
    u = (c + r) % m if diagonal else c
    return np.isin(u // mirrors, which).astype(float)


neighbour, taken = [], []
cases = [(550, 4, 1.15, 1, False, 0.0, 0.0), (550, 4, 1.15, 2, True, 0.0, 0.0), (562, 4, 1.15, 1, False, 0.12, 12.0),
         (525, 4, 1.15, 1, False, 0.0, 12.0), (540, 4, 1.4, 2, False, 0.0, 12.0), (650, 4, 1.15, 2, True, 0.12, 12.0),
         (610, 4, 1.1, 1, True, 0.0, 12.0), (700, 8, 1.2, 1, False, 0.0, 12.0)]
for nm, n, q, e, diagonal, obscured, tilt in cases:
    m = 8
    masks = [strips(m, diagonal, e, [1]), strips(m, diagonal, e, [1, 2]), np.ones((m, m))]
    one, both, full = light(masks, nm, 13.7, n, q, obscured, np.radians(tilt))
    neighbour.append({"Nm": nm, "FNumber": n, "Oversize": q, "Mirrors": e, "Diagonal": diagonal, "Obscured": obscured, "Tilt": tilt,
                      "D": both / one - 2, "Taken": full / m**2})

airy = []
for nm, n, width in [(500, 4, 1.0), (550, 4, 13.7), (850, 8, 9.0), (1600, 4, 9.7)]:
    unit = nm / 1000 * n
    spot = lambda r: np.pi / 4 / unit**2 * (1 if r == 0 else (2 * special.j1(np.pi * r / unit) / (np.pi * r / unit)) ** 2)
    circle = integrate.quad(lambda r: 2 * np.pi * r * spot(r), 0, width / 2, limit=200)[0]
    # The light of a strip: sum over rings of the share of each ring within it, 1 - what lies beyond.
    ring = lambda r: 4 * r * spot(r) * (np.pi / 2 if r <= width / 2 else np.arcsin(width / 2 / r))
    inner = integrate.quad(ring, 0, width / 2, limit=400)[0]
    far = width / 2 + unit * np.linspace(0, np.sqrt(500), 80001) ** 2  # of the square root: ring() has one at the edge
    v = np.pi * far / unit
    beyond = 4 * far * np.pi / 4 / unit**2 * (2 * special.j1(v) / v) ** 2 * np.arcsin(width / 2 / far)
    outer = integrate.simpson(beyond * 2 * np.sqrt(unit * (far - width / 2)), x=np.linspace(0, np.sqrt(500), 80001))
    airy.append({"Nm": nm, "FNumber": n, "Width": width, "Circle": circle, "Strip": inner + outer})

# Cyclic designs from difference sets: S-matrices of 7 and 11, a sparse code of 13.
leak, random = [], np.random.default_rng(10)
for v, opened, contrast in [(7, [1, 2, 4], 1500.0), (11, [1, 3, 4, 5, 9], 2000.0), (13, [0, 1, 3, 9], 900.0)]:
    design = np.array([[1.0 if (j + k) % v in opened else 0.0 for j in range(v)] for k in range(v)])
    x = random.exponential(1, v)
    shown = np.where(design == 1, 1.0, 1 / contrast) @ x
    leak.append({"Contrast": contrast, "K": len(opened), "Light": x.tolist(), "Decoded": np.linalg.solve(design, shown).tolist()})
print(json.dumps({"Neighbour": neighbour, "Airy": airy, "Leak": leak}))
