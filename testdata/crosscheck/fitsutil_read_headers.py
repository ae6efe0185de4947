"""Write a FITS file whose headers hold cards of every kind, with astropy.

usage: fitsutil_read_headers.py FILE

Prints a JSON object: for each HDU a list of [key, kind, value, comment], with floats as C99
hexadecimal text, so that they can be compared exactly. Long strings go by CONTINUE (FITS
Standard 4.0, section 4.2.1.2), long keywords by HIERARCH.
"""
import json
import sys

import numpy as np
from astropy.io import fits
from astropy.io.fits.card import Undefined

rng = np.random.default_rng(7)


def floats(n):
    """Finite doubles of random bits, and awkward ones."""
    bits = rng.integers(0, 2**64, size=n, dtype=np.uint64).view(np.float64)
    awkward = [0.1, 1 / 3, 5e-324, 1.7976931348623157e308, 2.2250738585072014e-308, 1e23, -1e22, 123456789.0, -0.5, 1e16]
    return [float(x) for x in bits if np.isfinite(x)] + awkward


first = fits.PrimaryHDU()
h = first.header
h["TRUTH"] = (True, "a logical")
h["LIE"] = False
h["COUNT"] = (-42, "an integer / with a slash")
h["BIG"] = 9223372036854775807
h["SMALL"] = -9223372036854775808
h["WORD"] = ("a word", "of comment")
h["QUOTE"] = "O'HARA's ''twice''"
h["EMPTY"] = ""
h["BLANKS"] = "   lead"
h["SLASH"] = ("a / b", "c / d")
h["AMPER"] = "fish & chips &"
h["UNDEF"] = (Undefined(), "no value")
h["CPLX"] = 1.5 - 2.25j
h["HIERARCH long.key name with blanks"] = (3.5, "beyond eight")
h["HIERARCH ESO TEL AIRM"] = 1.25
h.add_comment("a comment with = and ' and /")
h.add_history("a history " * 20)
for length in list(range(60, 75)) + [133, 134, 135, 136, 137, 200, 201, 202, 203, 1000, 5000]:
    # Without quotes: astropy 5.2 tears a doubled quote apart where a record ends, which makes
    # two bad cards. Our own long strings have them: see fitsutil_read_cards.py.
    h[f"L{length}"] = ("".join(chr(c) for c in rng.integers(40, 127, size=length)), "long")
for length in (66, 67, 68, 69, 134, 300):
    h[f"S{length}"] = ("word " * length)[:length].rstrip() + "."

second = fits.ImageHDU(np.zeros((2, 2), dtype=np.int16), name="NUMBERS")
for i, x in enumerate(floats(1500)):
    second.header[f"F{i}"] = x

# Cards as other writers make them, in free format and with exponent D.
third = fits.ImageHDU(np.zeros((1, 1), dtype=np.uint8), name="FOREIGN")
for text in ("FREE1   =1", "FREE2   = 7/ no blank", "FREE3   =    'x' / c", "EXPD    = 1.5D+03", "EXPE    = -.25e-2",
             "PLUS    = +17", "POINT   = 5.", "FRACT   = .5", "PADDED  = '  both  '", "lower   = 3"):
    third.header.append(fits.Card.fromstring(text), end=True)

hdus = fits.HDUList([first, second, third])
hdus.writeto(sys.argv[1], output_verify="ignore")


def kind(value):
    if isinstance(value, Undefined) or value is None:
        return "undefined", None
    if isinstance(value, (bool, np.bool_)):
        return "bool", bool(value)
    if isinstance(value, str):
        return "string", value
    if isinstance(value, complex):
        return "complex", [value.real.hex(), value.imag.hex()]
    if isinstance(value, int):
        return "int", str(value)
    return "float", float(value).hex()


out = []
with fits.open(sys.argv[1]) as back:
    for hdu in back:
        cards = []
        for card in hdu.header.cards:
            if card.keyword in ("COMMENT", "HISTORY"):
                cards.append([card.keyword, "commentary", None, card.value])
            else:
                cards.append([card.keyword, *kind(card.value), card.comment])
        out.append(cards)
json.dump(out, sys.stdout)
