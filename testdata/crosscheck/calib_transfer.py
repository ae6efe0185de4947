"""Photon transfer by numpy. Makes pairs of flats and biases of one amplifier, in ADU
above the bias level, with a steep lamp, responses of 1 % rms, a lamp that drifts by 1 %
between the two of a pair, levels that differ and, if asked for, struck pixels; writes
them as little-endian float32, pair after pair, A then B; and measures gain and read
noise from them by a weighted straight line through the binned variances of the
differences (B scaled to A's level). Prints JSON.
Arguments: file, gain, read noise, rows, columns, struck pixels per 1000, seed."""
import json
import sys

import numpy as np

path = sys.argv[1]
gain, read_noise = float(sys.argv[2]), float(sys.argv[3])
rows, columns = int(sys.argv[4]), int(sys.argv[5])
struck, seed = float(sys.argv[6]), int(sys.argv[7])
rng = np.random.default_rng(seed)
response = 1 + 0.01 * rng.standard_normal((rows, columns))
lamp = np.linspace(0.05, 1, columns)[None, :] * np.linspace(0.8, 1, rows)[:, None] * response
pairs = []
for electrons in (0, 0, 8000, 40000):
    frames = []
    for scale in (1.0, 1.01):
        e = rng.poisson(electrons * scale * lamp).astype(float)
        hit = rng.random((rows, columns)) < struck / 1000
        e[hit] += rng.lognormal(np.log(1500), 0.8, hit.sum())
        adu = 1000 + 0.3 * rng.standard_normal() + (e + read_noise * rng.standard_normal((rows, columns))) / gain
        frames.append(np.round(adu) - 1000)
    pairs.append(frames)
np.array(pairs, dtype="<f4").tofile(path)

means, variances, weights = [], [], []
for a, b in pairs:
    good = np.abs(a - b - np.median(a - b)) < 8 * np.std(a - b)
    ratio = 1.0 if a.mean() < 100 else a[good].sum() / b[good].sum()
    m, d = ((a + b) / 2)[good], (a - ratio * b)[good]
    order = np.argsort(m)
    for part in np.array_split(order, 20 if a.mean() > 100 else 1):
        x = d[part] - np.median(d[part])
        for _ in range(10):
            x = x[np.abs(x) < 4 * np.std(x)]
        means.append(m[part].mean() if a.mean() > 100 else 0)
        variances.append(np.var(x) / (1 + ratio**2) / 0.998929)
        weights.append(len(x))
means, variances, weights = map(np.array, (means, variances, weights))
slope, level = np.polyfit(means, variances, 1, w=np.sqrt(weights) / variances)
print(json.dumps({"Gain": 1 / slope, "ReadNoise": float(np.sqrt(level - 1 / 12) / slope)}))
