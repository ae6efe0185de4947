"""Logarithms of chi-square tails by scipy: arguments x,dof pairs; prints one a line."""
import sys

from scipy.special import gammainc, gammaincc
import numpy as np

for arg in sys.argv[1:]:
    x, dof = map(float, arg.split(","))
    q = gammaincc(dof / 2, x / 2)
    print(repr(float(np.log(q) if q < 0.5 else np.log1p(-gammainc(dof / 2, x / 2)))))
