"""Values that package rehearse checks itself against, from scipy.

usage: rehearse_values.py bessel X...          exp(-x) I0(x)
       rehearse_values.py poisson FILE MEAN...
           the counts of FILE (float32), as many of each mean: the probability of
           a larger chi-square, for each mean
       rehearse_values.py blur SIGMA R,R,... [KIND RADIUS WIDTH]...
           brightness of round sources of total 1 behind a Gaussian, at radii R, by
           a two-dimensional sum
"""
import sys

import numpy as np
from scipy import special, stats

what, rest = sys.argv[1], sys.argv[2:]
if what == "bessel":
    print(*(repr(float(special.i0e(float(x)))) for x in rest))
elif what == "poisson":
    means = [float(m) for m in rest[1:]]
    for mean, counts in zip(means, np.fromfile(rest[0], "<f4").reshape(len(means), -1)):
        low, high = int(stats.poisson.ppf(1e-4, mean)), int(stats.poisson.ppf(1 - 1e-4, mean))
        width = max(1, (high - low) // 40)
        edges = np.arange(low, high + width, width)  # bins [edge, edge + width)
        cdf = stats.poisson.cdf(edges - 1, mean)
        expected = np.diff(np.concatenate([[0], cdf, [1]])) * len(counts)
        seen = np.histogram(counts, np.concatenate([[-1e9], edges, [1e9]]))[0]
        keep = expected > 5
        chi2 = ((seen - expected)[keep] ** 2 / expected[keep]).sum()
        print(repr(float(stats.chi2.sf(chi2, keep.sum() - 1))))
elif what == "blur":
    sigma, radii = float(rest[0]), [float(r) for r in rest[1].split(",")]
    for kind, radius, width in zip(*[iter(rest[2:])] * 3):
        radius, width = float(radius), float(width)
        reach = 25 * radius if kind == "galaxy" else radius + 8 * width
        # Polar rings about the source's own centre: no cusp is stepped over.
        r = (np.arange(20000) + 0.5) * reach / 20000
        profile = np.exp(-r / radius) if kind == "galaxy" else np.exp(-0.5 * ((r - radius) / width) ** 2)
        angle = (np.arange(96) + 0.5) * 2 * np.pi / 96
        weight = profile * r
        weight /= weight.sum() * len(angle)
        x, y = r[:, None] * np.cos(angle), r[:, None] * np.sin(angle)
        for at in radii:
            d2 = (x - at) ** 2 + y ** 2
            print(repr(float((weight[:, None] * np.exp(-d2 / 2 / sigma ** 2)).sum() / (2 * np.pi * sigma ** 2))), end=" ")
        print()
