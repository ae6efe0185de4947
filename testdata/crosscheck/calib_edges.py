"""Struck pixels of frames by astroscrappy, for those of calib.EdgeRule.

usage: calib_edges.py FRAMES FLAGS WIDTH HEIGHT READ_NOISE_E SIGMAS FRACTION CONTRAST ITERATIONS OUT

FRAMES holds float32 frames in electrons, little-endian, one after the other, and
FLAGS an int16 a pixel, not 0 where it is to be left alone in all of them; OUT gets
a byte a pixel, 1 where it is struck. As near to the paper as astroscrappy goes: whole
medians instead of separated ones, struck pixels replaced by the median
of the others, no saturation.
"""
import sys

import astroscrappy
import numpy as np

path, flags, width, height, noise, sigmas, fraction, contrast, iterations, out = sys.argv[1:]
frames = np.fromfile(path, "<f4").reshape(-1, int(height), int(width))
flags = np.fromfile(flags, "<i2").reshape(int(height), int(width))
masks = []
for frame in frames:
    mask, _ = astroscrappy.detect_cosmics(
        frame, inmask=flags != 0, sigclip=float(sigmas), sigfrac=float(fraction), objlim=float(contrast),
        gain=1.0, readnoise=float(noise), satlevel=np.inf, niter=int(iterations),
        sepmed=False, cleantype="medmask", fsmode="median")
    masks.append(mask)
np.array(masks).astype(np.uint8).tofile(out)
print(astroscrappy.__version__)
