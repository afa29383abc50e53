"""Progress of what takes more than two seconds: on a terminal one line that changes, elsewhere a line now and then."""

import sys
import time
from typing import TextIO

QUIET_S = 2.0
TERMINAL_S, PLAIN_S = 0.2, 10.0


class Progress:
    """Call it with (done, total); ``clear`` removes the line."""

    def __init__(self, what: str, out: TextIO | None = None) -> None:
        self._what, self._out = what, out or sys.stderr
        self._begun_s = self._told_s = time.monotonic()
        self._shown = False

    def __call__(self, done: int, total: int) -> None:
        """Say how far it is, where it is time to."""
        now_s, terminal = time.monotonic(), self._out.isatty()
        if now_s - self._begun_s < QUIET_S or now_s - self._told_s < (TERMINAL_S if terminal else PLAIN_S):
            return
        self._told_s = now_s
        text = f"{self._what}: {100 * done // max(total, 1)} %"
        print(f"\r{text}" if terminal else text, end="" if terminal else "\n", file=self._out, flush=True)
        self._shown = terminal

    def clear(self) -> None:
        """Leave the terminal's line empty."""
        if self._shown:
            print("\r" + " " * (len(self._what) + 8) + "\r", end="", file=self._out, flush=True)
            self._shown = False
