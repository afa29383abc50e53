"""A process between a host and its board that says when stops pass: the far end of every path that is timed.

``python -m hvhost.speed.relay BOARD`` opens the board's terminal and makes two of its own; it answers with their names
on standard output, ``daemon NAME`` and ``bare NAME``, and from then on with one line for each stop that passes from
either: ``daemon cut NANOSECONDS`` (monotonic).  Bytes of the first go to the board and back; the second is read only.
What the daemon does not read in time is dropped, as a UART would.
"""

import contextlib
import os
import pty
import select
import subprocess
import sys
import time
import tty
from typing import Self

from hvhost.speed.child import set_fifo

STOPS = (b"\ncut ", b"\nlower ")
READ_MAX = 65_536
ALONE_S = 1.0
RELAY_FIFO = 35  # it only moves bytes and looks at the clock


class Relay:
    """The process; ``device`` is what a daemon opens, ``bare`` what the thing that it is compared with opens."""

    def __init__(self, board: str) -> None:
        self._child = subprocess.Popen([sys.executable, "-m", "hvhost.speed.relay", board], stdin=subprocess.DEVNULL,
                                       stdout=subprocess.PIPE)
        assert self._child.stdout is not None
        self._lines = self._child.stdout
        self.device, self.bare = (self._lines.readline().decode().split()[1] for _ in range(2))

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self._child.terminate()
        self._child.wait()
        self._lines.close()

    def drain(self, quiet_s: float) -> None:
        """Read what passed, until nothing has for so long."""
        while select.select([self._lines], [], [], quiet_s)[0]:
            if not self._lines.readline():
                return

    def passed(self, side: str, longest_s: float) -> int | None:
        """Wait for the next stop of one side; returns its monotonic nanoseconds, None where there is none."""
        until_s = time.monotonic() + longest_s
        while select.select([self._lines], [], [], max(0.0, until_s - time.monotonic()))[0]:
            words = self._lines.readline().decode().split()
            if not words:
                return None
            if words[0] == side:
                return int(words[2])
        return None


def main(board: str) -> None:
    """Relay until ended."""
    set_fifo(RELAY_FIFO)
    to_board = os.open(board, os.O_RDWR | os.O_NOCTTY | os.O_NONBLOCK)
    tty.setraw(to_board)
    masters: dict[int, str] = {}
    for side in ("daemon", "bare"):
        master, slave = pty.openpty()
        tty.setraw(master)
        tty.setraw(slave)
        os.set_blocking(master, False)
        masters[master] = side
        print(side, os.ttyname(slave), flush=True)
    daemon = next(iter(masters))
    unread = bytearray()
    parent = os.getppid()
    while os.getppid() == parent:  # whoever asked for the times is still there
        ready, _, _ = select.select([to_board, *masters], [], [], ALONE_S)
        now_ns = time.monotonic_ns()
        for fd in ready:
            try:
                data = os.read(fd, READ_MAX)
            except OSError:
                return
            if not data:  # the board is gone: a process that never waits must not stay
                return
            if fd == to_board:
                with contextlib.suppress(BlockingIOError):
                    os.write(daemon, data)
                continue
            for stop in STOPS:
                if stop in data:
                    print(masters[fd], stop.split()[0].decode(), now_ns, flush=True)
            if fd == daemon:
                unread += data
        if unread:
            with contextlib.suppress(BlockingIOError):
                del unread[: os.write(to_board, unread)]


if __name__ == "__main__":
    main(sys.argv[1])
