"""Interpolate tables with numpy.interp.

The argument is a JSON list of {X, Y, At, Zero}; printed is the list of the
values at At, 0 beyond the ends if Zero, else the value of the end.
"""
import json
import sys

import numpy as np

answers = []
for query in json.loads(sys.argv[1]):
    end = 0.0 if query["Zero"] else None
    answers.append(np.interp(query["At"], query["X"], query["Y"], left=end, right=end).tolist())
print(json.dumps(answers))
