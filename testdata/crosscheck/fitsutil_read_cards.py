"""Read the headers of a FITS file with astropy and print them as JSON.

usage: fitsutil_read_cards.py FILE

Each card of the primary header is [key, value, comment]; floats are C99 hexadecimal text.
"""
import json
import sys
import warnings

from astropy.io import fits
from astropy.io.fits.card import Undefined

warnings.simplefilter("error")  # a card that astropy only tolerates is a fault of its writer
cards = []
with fits.open(sys.argv[1]) as hdus:
    hdus.verify("exception")
    for card in hdus[0].header.cards:
        value = card.value
        if isinstance(value, Undefined):
            value = None
        elif isinstance(value, float):
            value = value.hex()
        cards.append([card.keyword, value, card.comment])
json.dump(cards, sys.stdout)
