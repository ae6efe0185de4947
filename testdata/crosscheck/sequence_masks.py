"""Check sequences from the words of their contract, sharing no code with it.

usage: sequence_masks.py DIR...

For every step of sequence.fits (read by astropy) the mirror states are built
again from CODE, ELEMENTS and ROWS with numpy, their SHA-256 is compared with
MASKID, and the PNG of that name (read by PIL) with the states. Code rows are
built again from FAMILY, CODEV and CODEPOLY, profile.yaml and target.yaml are
digested again. Prints one line of counts a folder; exits 1 at the first
difference.
"""
import hashlib
import pathlib
import sys

import numpy as np
import yaml
from astropy.io import fits
from PIL import Image


def first_row(family, v, poly):
    """The first row of a code: see Harwit & Sloane 1979, appendix (Legendre),
    and the linear recurrence of a primitive polynomial (m-sequence)."""
    if family == "m-sequence":
        p = poly.bit_length() - 1
        assert v == 2**p - 1
        s = [0] * (p - 1) + [1]
        while len(s) < v:
            s.append(sum(s[len(s) - p + t] for t in range(p) if poly >> t & 1) % 2)
        return np.array(s, dtype=np.uint8)
    if family == "legendre":
        assert poly == 0
        s = np.zeros(v, dtype=np.uint8)
        s[[i * i % v for i in range(v)]] = 1
        return s
    raise SystemExit("unknown family " + family)


class Device:
    """The mirrors' coordinates, and what ELEMENTS and ROWS say of each."""

    def __init__(self, dmd, elements, rows):
        y, x = np.mgrid[0 : dmd["rows"], 0 : dmd["columns"]]
        self.u, self.w = (x, y) if dmd["mounting"] == "square" else (x + y, y - x)
        self.rows = [(r["FIRST"], r["LAST"], r["USE"].strip(), r["ELEMENT"]) for r in rows]
        self.element_of = np.full(x.shape, -1)
        self.column_of = np.full(x.shape, -1)  # the code column, -1 for none
        for e in elements:
            if e["DARK"]:
                assert e["ELEMENT"] == e["FIRST"] == e["LAST"] == -1
                continue
            strip = (self.u >= e["FIRST"]) & (self.u <= e["LAST"])
            self.element_of[strip] = e["ELEMENT"]
            self.column_of[strip] = e["COLUMN"]

    def states(self, bits, science):
        on = np.append(bits, 0)[self.column_of].astype(np.uint8)
        for use in ("sentinel", "closed"):
            for first, last, what, element in self.rows:
                band = (self.w >= first) & (self.w <= last)
                if what != use:
                    continue
                if use == "closed":
                    on[band & ((element == -1) | (self.element_of == element))] = 0
                elif science:
                    on[band] = self.element_of[band] == element
        return on


def check_field(target, device, elements):
    """The strips lie side by side, in order of the columns, each element_mirrors wide; their
    middle is that of the device's u, or half a mirror beyond, plus field.offset_u."""
    field = target.get("field") or {}
    assert not field.get("rows"), field
    strips = [(int(e["FIRST"]), int(e["LAST"])) for e in elements if not e["DARK"]]
    wide = target["code"]["element_mirrors"]
    assert all(last - first + 1 == wide for first, last in strips)
    assert all(b[0] == a[1] + 1 for a, b in zip(strips, strips[1:]))
    middle = strips[0][0] + strips[-1][1] - device.u.min() - device.u.max() - 2 * field.get("offset_u", 0)
    assert middle in (0, 1), middle


def check(folder):
    profile = yaml.safe_load((folder / "profile.yaml").read_text())
    dmd = profile["dmd"]
    with fits.open(folder / "sequence.fits", checksum=True) as hdus:
        head = hdus[0].header
        steps, code = hdus["STEPS"].data, hdus["CODE"].data
        elements, rows = hdus["ELEMENTS"].data, hdus["ROWS"].data
        v = head["CODEV"]
        assert code.dtype == np.uint8 and code.shape == (len(steps), v)
        device = Device(dmd, elements, rows)
        check_field(yaml.safe_load((folder / "target.yaml").read_text()), device, elements)
        s = first_row(head["FAMILY"], v, head["CODEPOLY"])
        assert s.sum() == head["CODEK"]
        seen, coded = set(), 0
        for step, bits in zip(steps, code):
            if step["ROW"] >= 0:
                coded += 1
                assert np.array_equal(bits, np.roll(s, -step["ROW"])), step
            on = device.states(bits, step["KIND"].strip() == "science")
            maskid = hashlib.sha256(on.tobytes()).hexdigest()[:16]
            assert maskid == step["MASKID"], (step, maskid)
            if maskid in seen:
                continue
            seen.add(maskid)
            with Image.open(folder / "masks" / (maskid + ".png")) as image:
                assert image.mode == "1", image.mode
                assert np.array_equal(np.asarray(image), on == 1), maskid
        assert {p.name for p in (folder / "masks").iterdir()} == {m + ".png" for m in seen}
        for card, name in (("PROFSHA", "profile.yaml"), ("TARGSHA", "target.yaml")):
            assert head[card] == hashlib.sha256((folder / name).read_bytes()).hexdigest(), card
    print(len(steps), coded, len(seen), dmd["mounting"])


for name in sys.argv[1:]:
    check(pathlib.Path(name))
