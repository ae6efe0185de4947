#!/usr/bin/env python3
"""What decoding costs as a matrix product: numpy's float32 A Y, by OpenBLAS on one thread.

usage: numpy_gemm.py, then a line "V PIXELS" on standard input for each product that is wanted

The first line printed is the name of OpenBLAS's kernels. Then a line is answered with the mean seconds, of processor time, of one product
of a V x V by a V x PIXELS matrix, of as many as fit into a tenth of a second, at least one.
"""
import ctypes
import os
import sys
import time

os.environ["OPENBLAS_NUM_THREADS"] = "1"
import numpy as np  # noqa: E402  the number of threads is read when the library is loaded


def core_name():
    with open("/proc/self/maps") as maps:
        for line in maps:
            if "openblas" in line:
                library = ctypes.CDLL(line.split()[-1])
                library.openblas_get_corename.restype = ctypes.c_char_p
                return library.openblas_get_corename().decode()
    sys.exit("numpy computes without OpenBLAS; apt-get install libopenblas0-pthread")


def seconds(v, pixels, cache={}):
    if (v, pixels) not in cache:
        cache.clear()
        rng = np.random.default_rng(v)
        a = rng.choice(np.array([-2, 2], "f4") / (v + 1), (v, v))
        cache[v, pixels] = a, rng.random((v, pixels), "f4"), np.empty((v, pixels), "f4")
        np.dot(*cache[v, pixels][:2], out=cache[v, pixels][2])
    a, y, x = cache[v, pixels]
    start, n = time.process_time(), 0
    while True:
        np.dot(a, y, out=x)
        n += 1
        took = time.process_time() - start
        if took > 0.1:
            return took / n


print(core_name(), flush=True)
for line in sys.stdin:
    print(repr(seconds(*map(int, line.split()))), flush=True)
