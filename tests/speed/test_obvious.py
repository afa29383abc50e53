"""The obvious script: it does read what the board would print."""

import csv
import io

from hvhost.speed.obvious import obvious, spoken
from hvhost.wire.frames import Block


def test_it_turns_a_decimal_line_a_pair_into_a_row() -> None:
    """Two pairs in, two rows of three numbers out."""
    block = Block(100, 1000, 0, 0, 4, 0, 0, 0, 0, 0, (16_384, 3277, -16_384, 0))
    out = io.StringIO()
    assert obvious(io.BytesIO(spoken([block], 1e-3)), out) == 2
    rows = list(csv.reader(io.StringIO(out.getvalue())))
    assert rows == [["0.1", "12500.0", "1.0001"], ["0.101", "-12500.0", "0.0"]]
