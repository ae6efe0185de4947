"""Recover read noise, gain, bias and dark current from the frames of a night.

usage: rehearse_detector.py NIGHT SEQUENCE.fits AMPLIFIERS.json

AMPLIFIERS.json lists, for each amplifier, data and overscan sections (x1, x2,
y1, y2, from 1, inclusive). Prints one JSON object a amplifier. Only numpy and
astropy: read noise from differences of biases (Janesick, Photon Transfer,
2007: the variance of a difference is twice that of one), gain from the
photon transfer of pairs of flats, dark from dark less bias.
"""
import json
import sys

import numpy as np
from astropy.io import fits

night, sequence, amplifiers = sys.argv[1:]
steps = fits.open(sequence)["STEPS"].data
code = fits.open(sequence)["CODE"].data


def load(step):
    return fits.getdata(f"{night}/f{step:05d}.fits").astype(float)


def steps_of(kind):
    return [int(s["STEP"]) for s in steps if s["KIND"].strip() == kind]


biases = [load(s) for s in steps_of("bias")]
darks = [load(s) for s in steps_of("dark")]
dark_time = [float(s["EXPTIME"]) for s in steps if s["KIND"].strip() == "dark"][0]
flats = {}
for s in steps:
    if s["KIND"].strip() == "flat" and s["ROW"] < 0:
        flats.setdefault(code[s["STEP"] - 1].tobytes(), []).append(load(int(s["STEP"])))


def section(image, box):
    x1, x2, y1, y2 = box
    return image[y1 - 1:y2, x1 - 1:x2]


def level(image, amp):
    """Bias of a frame, row by row: the overscan, smoothed over 9 rows."""
    if not amp["overscan"]:
        return 0.0
    rows = section(image, amp["overscan"]).mean(axis=1)
    kernel = np.ones(9)
    return (np.convolve(rows, kernel, "same") / np.convolve(np.ones_like(rows), kernel, "same"))[:, None]


answers = []
for amp in json.load(open(amplifiers)):
    box = amp["data"]
    bias = [section(b, box) for b in biases]
    # Differences of neighbours in time; the mean of a difference (drift) goes.
    noise2, n = 0.0, 0
    for a, b in zip(biases[0::2], biases[1::2]):
        d = section(a, box) - level(a, amp) - section(b, box) + level(b, amp)
        d = d - d.mean()
        noise2 += (d ** 2).sum() / 2
        n += d.size
    read2 = noise2 / n
    if amp["overscan"]:
        # The level subtracted has the noise of 9 x 16 overscan pixels.
        x1, x2, _, _ = amp["overscan"]
        read2 /= 1 + 1 / (9 * (x2 - x1 + 1))
    master = np.mean([section(b, box) - level(b, amp) for b in biases], axis=0)
    signal, variance, m = 0.0, 0.0, 0
    for frames in flats.values():
        for a, b in zip(frames[0::2], frames[1::2]):
            fa = section(a, box) - level(a, amp) - master
            fb = section(b, box) - level(b, amp) - master
            bright = (fa + fb) / 2 > 200
            if not bright.any():
                continue
            d = (fa - fb)[bright]
            signal += ((fa + fb) / 2)[bright].sum()
            variance += (d ** 2).sum() / 2 - read2 * d.size
            m += d.size
    gain = signal / variance
    dark = np.mean([section(d, box) - level(d, amp) for d in darks], axis=0) - master
    # ADC rounding adds 1/12 ADU^2.
    answers.append({
        "read_noise_e": float(np.sqrt(read2 - 1 / 12) * gain),
        "gain": float(gain),
        "bias_adu": float(np.mean(bias)),
        "dark_e_per_s": float(dark.mean() * gain / dark_time),
        "read_samples": n, "gain_samples": m, "dark_samples": int(dark.size * len(darks)),
        "flat_adu": float(signal / m),
    })
print(json.dumps(answers))
