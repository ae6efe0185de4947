"""Print scipy.linalg.hadamard(ORDER) of each argument, a row a line, as + and -."""
import sys

from scipy.linalg import hadamard

for order in sys.argv[1:]:
    for row in hadamard(int(order)):
        print("".join("+" if x > 0 else "-" for x in row))
