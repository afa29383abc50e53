"""The obvious script: what one writes in ten minutes where the board prints a decimal ``t,v,i`` line for each pair.

It is kept as the thing to compare with, and as nothing else: no check of a line, no rule, no stop, and a record that
nobody can prove.
"""

import csv
from collections.abc import Iterable
from typing import BinaryIO, TextIO

from hvhost.wire.frames import Block

V_PER_CODE, MA_PER_CODE = 25_000 / 32_768, 10 / 32_768


def obvious(port: BinaryIO, out: TextIO) -> int:
    """Read lines until the port ends, write rows; returns how many."""
    rows = csv.writer(out)
    pairs = 0
    for line in port:
        fields = line.decode().strip().split(",")
        t, v, i = (float(field) for field in fields)
        rows.writerow([t, v, i])
        pairs += 1
    return pairs


def spoken(blocks: Iterable[Block], sample_s: float) -> bytes:
    """Return the same pairs as such a board would print them."""
    lines = []
    for block in blocks:
        t_s = block.index * sample_s
        for k, (v, i) in enumerate(zip(block.codes[0::2], block.codes[1::2], strict=True)):
            lines.append(f"{t_s + k * sample_s:.4f},{v * V_PER_CODE:.1f},{i * MA_PER_CODE:.4f}\n")
    return "".join(lines).encode("ascii")
