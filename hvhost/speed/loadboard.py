"""The board of the loaded scenes in a process of its own: ten thousand pairs a second, pressed on request.

``python -m hvhost.speed.loadboard BENCH`` prints ``port NAME``; a line on standard input presses the arm input; it
ends with its standard input.
"""

import subprocess
import sys
from dataclasses import replace
from pathlib import Path
from typing import Self

from hvhost.speed.board import Board
from hvhost.speed.child import set_fifo
from hvhost.standin.bench import config_of
from hvhost.standin.params import demo

SAMPLE_TICKS = 1  # of 10 k ticks a second
BOARD_FIFO = 30  # hardware waits for no processor; where this is not permitted the machine's stalls are the board's


class LoadBoard:
    """The process; ``device`` is its terminal."""

    def __init__(self, bench: Path) -> None:
        self._child = subprocess.Popen([sys.executable, "-m", "hvhost.speed.loadboard", str(bench)],
                                       stdin=subprocess.PIPE, stdout=subprocess.PIPE)
        assert self._child.stdout is not None
        self.device = self._child.stdout.readline().decode().split()[1]

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self._child.communicate(timeout=30.0)

    def press(self) -> None:
        """Press the arm input."""
        assert self._child.stdin is not None
        self._child.stdin.write(b"press\n")
        self._child.stdin.flush()


def main(bench: str) -> None:
    """Run until standard input ends."""
    set_fifo(BOARD_FIFO)
    with Board(Path(bench), replace(config_of(demo()), sample_ticks=SAMPLE_TICKS)) as board:
        print("port", board.device, flush=True)
        for _ in sys.stdin:
            board.press()


if __name__ == "__main__":
    main(sys.argv[1])
