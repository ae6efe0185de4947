"""What the dark columns of a code tell, in numpy: pairing, throughput, all-off factor, struck samples, error scale.

Part of numpy_full.py. The formulas are those of the design: P projects on the row space of Ag, the dark rows of the
inverse code; with G = sum y y'/s^2 over sampled pixels, H = P * (G - noise), the factors 1 + e of the frames follow by
e = S H (H S H + H + B)^-1 (-H 1).
"""
import numpy as np
from scipy.ndimage import uniform_filter1d


def row_basis(a_dark):
    """An orthonormal basis [g, v] of the row space."""
    return np.linalg.svd(a_dark, full_matrices=False)[2]


def gram(y, s2):
    """G and the noise's part of its diagonal, of y [v, pixel] with variances s2; chi-squares count in units of s2's mean."""
    mean = s2.mean(axis=0)
    weighted = y / np.sqrt(mean)
    return (weighted.astype("f8") @ weighted.T.astype("f8"), (s2 / mean).sum(axis=1, dtype="f8"))


def best_pairing(g, p):
    """The likeliest of plausible mix-ups of all frames and of all exchanges of two."""
    v = len(g)
    straight = np.arange(v)
    tries = {"as labelled": straight, "one late": np.roll(straight, -1), "one early": np.roll(straight, 1),
             "reversed": straight[::-1], "halves": np.roll(straight, v // 2)}
    scores = {name: (p * g[np.ix_(pi, pi)]).sum() for name, pi in tries.items()}
    base = scores["as labelled"]
    pg = p @ g
    diagonal = np.diag(g)
    # Exchanging frames k and m changes tr(P G[pi, pi]) by this much, all pairs at once.
    change = 2 * (pg + pg.T - np.diag(pg)[:, None] - np.diag(pg))
    change += (np.diag(p)[:, None] + np.diag(p) - 2 * p) * (diagonal[:, None] + diagonal - 2 * g)
    np.fill_diagonal(change, 0)
    scores["an exchange of two frames"] = base + change.min()
    best = min(scores, key=scores.get)
    return best if scores[best] < base - 28 else "as labelled"  # odds of 1e6 to 1


def estimate(g, noise, pixels, p, prior):
    """e and its covariance."""
    v = len(g)
    h = p * (g - np.diag(noise))
    values, vectors = np.linalg.eigh((h + h.T) / 2)
    h = (vectors * np.clip(values, 0, None)) @ vectors.T
    b = pixels * (np.diag(np.diag(p)) + p * p)
    hs = h @ prior
    e = prior @ h @ np.linalg.solve(hs @ h + h + b, -h @ np.ones(v))
    return e, prior - prior @ h @ np.linalg.solve(hs @ h + h + b, h @ prior)


def throughput(y, s2, a_dark, times):
    """e by frame, its covariance, and whether hold-out keeps it."""
    prior = 0.05 ** 2 * np.eye(len(times)) + 0.3 ** 2 * np.outer(times, times)
    g, noise = gram(y, s2)
    pixels = y.shape[1]
    halves = [row_basis(a_dark[k::2]) for k in (0, 1)]
    before = after = 0
    for fit, judge in (halves, halves[::-1]):
        e, _ = estimate(g, noise, pixels, fit.T @ fit, prior)
        p = judge.T @ judge
        before += (p * g).sum()
        after += (p * g * np.outer(1 + e, 1 + e)).sum()
    basis = row_basis(a_dark)
    e, posterior = estimate(g, noise, pixels, basis.T @ basis, prior)
    c = 1 / (1 + e)
    e = c.mean() / c - 1  # throughputs have mean 1
    flat = np.eye(len(e)) - 1 / len(e)
    dof = pixels * sum(len(b) for b in halves)
    return e, flat @ posterior @ flat, after < before - 9, before / dof, after / dof


def off_factor(y, s2, off, basis, variance):
    """The factor of the all-off light under which the mean dark decode vanishes, drawn to 1 by a prior of 10 %.

    variance is that of off."""
    mark = basis.T @ (basis @ np.ones(len(y)))
    w = off / s2.mean(axis=0)
    below = mark.sum() * (w * off - variance / s2.mean(axis=0)).sum()
    a = mark @ (y @ w) / below
    sigma = np.sqrt((mark ** 2).sum() * (w * off).sum()) / abs(below)
    return 1 + (a - 1) * 0.01 / (0.01 + sigma ** 2), sigma


def pursue(residual, s2, basis, most, threshold=5.5, margin=1.5):
    """Struck samples of pixels by orthogonal matching pursuit, charges refitted jointly.

    residual is basis @ y [g, pixel], s2 the mean variance of a pixel's samples. Returns frame, pixel and charge of each
    hit, what they add to the variance of the pixel's sample sum (by pixel), which pixels are ambiguous, and the residual
    without the hits.
    """
    norm = np.sqrt((basis ** 2).sum(axis=0))
    atoms = (basis / norm).astype("f4")
    s = np.sqrt(s2)
    scores = (atoms.T @ residual) / s
    active = np.flatnonzero(scores.max(axis=0) > threshold)
    best = scores[:, active].argmax(axis=0)
    chosen = np.empty((len(active), 0), int)
    hits, spread, ambiguous = [], np.zeros(len(s2), "f4"), np.zeros(len(s2), bool)
    residual = residual.copy()
    left = residual[:, active]

    def finish(which, chosen, charge, inverse):
        """Pixels that need no more hits: test each hit against the next best frame, the others held."""
        if not len(which):
            return
        m = chosen.shape[1]
        rest = residual[:, which] - np.einsum("pmg,pm->gp", atoms.T[chosen], charge)
        for i in range(m):
            alone = atoms.T @ (rest + atoms[:, chosen[:, i]] * charge[:, i]) / s[which]
            own = alone[chosen[:, i], np.arange(len(which))].copy()
            for k in range(m):
                alone[chosen[:, k], np.arange(len(which))] = -np.inf
            ambiguous[which[alone.max(axis=0) > own - margin]] = True
        cov = np.einsum("pmm->pm", inverse) * s2[which][:, None] / norm[chosen] ** 2
        spread[which] = cov.sum(axis=1)
        hits.append((chosen.ravel(), np.repeat(which, m), (charge / norm[chosen]).ravel()))
        residual[:, which] = rest

    for _ in range(most):
        if not len(active):
            break
        chosen = np.column_stack([chosen, best])
        a = atoms.T[chosen]
        inverse = np.linalg.inv(np.einsum("pmg,png->pmn", a, a) + 1e-9 * np.eye(a.shape[1], dtype="f4"))
        charge = np.einsum("pmn,png,gp->pm", inverse, a, residual[:, active], optimize=True)
        left = residual[:, active] - np.einsum("pmg,pm->gp", a, charge)
        scores = (atoms.T @ left) / s[active]
        scores[chosen.ravel(), np.repeat(np.arange(len(active)), chosen.shape[1])] = -np.inf
        more = scores.max(axis=0) > threshold
        if chosen.shape[1] == most:
            ambiguous[active[more]] = True
            more[:] = False
        finish(active[~more], chosen[~more], charge[~more], inverse[~more])
        best, chosen, active = scores[:, more].argmax(axis=0), chosen[more], active[more]
    if not hits:
        none = np.empty(0, int)
        return none, none, np.empty(0, "f4"), spread, ambiguous, residual
    frame, pixel, charge = (np.concatenate(h) for h in zip(*hits))
    return frame, pixel, charge, spread, ambiguous, residual


def error_scale(measured, expected, g, width=15):
    """q by pixel of a row image of mean squares, over 1 row x 15 columns, and what VARIANCE is multiplied by."""
    mean = uniform_filter1d(expected, width, axis=1)
    q = uniform_filter1d(measured, width, axis=1) / mean
    sigma = np.sqrt(2 / (g * width) * uniform_filter1d(expected ** 2, width, axis=1)) / mean
    return q, np.where(q > 1 + 3 * sigma, q, 1)
