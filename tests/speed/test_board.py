"""The board in a thread: it streams, and notes when a cut arrives."""

import os

from hvhost.speed.board import Board
from hvhost.wire.frames import Cut, encode_request
from hvhost.wire.lines import seal
from tests.speed.conftest import BENCH


def test_a_cut_is_noted_when_it_arrives() -> None:
    """Counted, with its moment; before that there is none."""
    with Board(BENCH) as board:
        fd = os.open(board.device, os.O_RDWR | os.O_NOCTTY)
        assert board.wait_cut(0, 0.0) is None
        os.write(fd, seal(encode_request(Cut(n=1, rule=0))))
        assert board.wait_cut(0, 10.0) is not None
        assert board.cuts == 1
        board.wait_off(10.0)
        os.close(fd)
