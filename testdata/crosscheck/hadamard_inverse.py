"""Compare the closed-form inverse entries of cyclic codes with numpy.linalg.inv.

Arguments: one JSON object a code, {"Row": "1110100", "Open": a, "Closed": b}.
Prints the number of codes and the worst difference over the largest entry.
"""
import json
import sys

import numpy as np

worst = 0.0
for arg in sys.argv[1:]:
    code = json.loads(arg)
    row = np.array([int(c) for c in code["Row"]])
    v = len(row)
    w = row[(np.arange(v)[:, None] + np.arange(v)[None, :]) % v]
    inverse = np.linalg.inv(w.astype(float))
    closed_form = np.where(w.T == 1, code["Open"], code["Closed"])
    worst = max(worst, np.abs(inverse - closed_form).max() / np.abs(inverse).max())
print(len(sys.argv) - 1, worst)
