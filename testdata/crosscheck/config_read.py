"""Read a YAML document with PyYAML and print what it holds.

Each item of `texts` gives a line of its code points in hexadecimal; each item
of `numbers` a line with Python's shortest exact float.
"""
import sys

import yaml

with open(sys.argv[1], "rb") as f:
    document = yaml.safe_load(f)
for text in document["texts"]:
    assert isinstance(text, str), text
    print("".join(f" {ord(c):x}" for c in text))
for number in document["numbers"]:
    assert isinstance(number, (int, float)), number
    print(float(number))
