"""Print scipy.signal.max_len_seq's sequences.

Arguments: polynomials over GF(2), coefficients as an integer, bit t that of x^t.
Prints one sequence of 0 and 1 a line.
"""
import sys

from scipy.signal import max_len_seq

for arg in sys.argv[1:]:
    poly = int(arg)
    degree = poly.bit_length() - 1
    # scipy takes the exponents between 0 and the degree, which it adds itself.
    taps = [t for t in range(1, degree) if poly >> t & 1]
    print("".join(map(str, max_len_seq(degree, taps=taps)[0])))
