"""Dark-column algebra by numpy: projectors by pinv, decodes by weighted least squares.

The argument names a file with a JSON list of cases {"Row": "1110100", "Dark": [...], "Lost": [...],
"Noise": [...], "Gram": [[...]], "GramNoise": [...], "Pixels": n, "Prior": [[...]]}; Noise
is -1 in a lost row. Prints a JSON list of {"Projector", "NoPedestal", "NoRows", "Decode",
"E", "Posterior"}, matrices as lists of rows. Decode (lit columns x v) solves y = W f for
the lit columns alone. E is before any normalisation.
"""
import json
import sys

import numpy as np
import scipy.linalg

out = []
for case in json.load(open(sys.argv[1])):
    row = np.array([int(c) for c in case["Row"]], float)
    v = len(row)
    w = row[(np.arange(v)[:, None] + np.arange(v)[None, :]) % v]
    dark = case["Dark"]
    lit = [j for j in range(v) if j not in dark]
    ag = np.linalg.inv(w)[dark]

    def projector(constraints):
        # Vectors u'Ag with u'Ag x = 0 for each constraint x.
        if constraints.size:
            u = scipy.linalg.null_space((ag @ constraints).T)
            rows = u.T @ ag
        else:
            rows = ag
        return np.linalg.pinv(rows) @ rows

    eye = np.eye(v)
    p = projector(np.zeros((v, 0)))
    noise = np.array(case["Noise"])
    used = np.where(noise > 0)[0]
    root = 1 / np.sqrt(noise[used])
    decode = np.zeros((len(lit), v))
    decode[:, used] = np.linalg.pinv(root[:, None] * w[np.ix_(used, lit)]) * root
    h = p * (np.array(case["Gram"]) - np.diag(case["GramNoise"]))
    s = np.array(case["Prior"])
    n = np.array(case["GramNoise"]) / case["Pixels"]
    pnp = p @ np.diag(n) @ p
    cov = pnp * np.array(case["Gram"]) + case["Pixels"] * p * p * np.outer(n, n)
    unit = np.sqrt(np.outer(n, n))
    values, vectors = np.linalg.eigh(h / unit)
    edge = 2 * np.sqrt(case["Pixels"] * np.diag(p).max())
    clipped = (vectors * np.where(values > edge, values, 0)) @ vectors.T * unit
    gain = s @ clipped @ np.linalg.inv(clipped @ s @ clipped + cov)
    out.append({
        "Projector": p.tolist(),
        "NoPedestal": projector(np.ones((v, 1))).tolist(),
        "NoRows": projector(eye[:, case["Lost"]]).tolist(),
        "Decode": decode.tolist(),
        "E": (-gain @ h.sum(axis=1)).tolist(),
        "Posterior": (s - gain @ clipped @ s).tolist(),
    })
json.dump(out, sys.stdout)
