"""Keys of the screen: bytes of a terminal -> acts, and the thread that reads them.

Space or c cuts, l lowers, t changes the plot, b switches the bell, q leaves.  Space is the largest key, is found
blind, and is the same in every keyboard layout.  Sequences that a terminal sends of itself (arrow keys, answers to
queries: one ends in 'c') are swallowed.

The reader is a thread of its own: a terminal that stops taking output blocks whoever draws, and the keys that stop
must work then too.
"""

import os
import select
import sys
import termios
import threading
import tty
from collections.abc import Callable
from enum import StrEnum
from types import TracebackType
from typing import Any, Self

SEQUENCE_S = 0.1  # the bytes of one sequence come together; a byte later than this is a key of its own


class Act(StrEnum):
    """What a key asks for."""

    CUT = "cut"
    LOWER = "lower"
    LEAVE = "leave"
    INTERRUPT = "interrupt"
    PLOT = "plot"
    BELL = "bell"


KEYS: dict[int, Act] = {
    ord(" "): Act.CUT, ord("c"): Act.CUT, ord("C"): Act.CUT, ord("l"): Act.LOWER, ord("L"): Act.LOWER,
    ord("q"): Act.LEAVE, ord("Q"): Act.LEAVE, 0x03: Act.INTERRUPT, ord("t"): Act.PLOT, ord("T"): Act.PLOT,
    ord("b"): Act.BELL, ord("B"): Act.BELL,
}


class KeyParser:
    """Takes bytes with the time of their arrival, returns acts; unknown bytes are nothing."""

    def __init__(self) -> None:
        self._sequence = b""
        self._last_s = float("-inf")

    def feed(self, data: bytes, now_s: float) -> list[Act]:
        """Return the acts of ``data``, in order."""
        if now_s - self._last_s > SEQUENCE_S:
            self._sequence = b""
        self._last_s = now_s
        acts = []
        for byte in data:
            if self._sequence or byte == 0x1B:
                self._swallow(byte)
            elif byte in KEYS:
                acts.append(KEYS[byte])
        return acts

    def _swallow(self, byte: int) -> None:
        """Follow ESC x, ESC O x and ESC [ ... final to their end (ECMA-48, 5.4: final bytes are 0x40-0x7E)."""
        self._sequence += bytes((byte,))
        length, second = len(self._sequence), self._sequence[1:2]
        if length == 1 or (length == 2 and second in (b"[", b"O")):
            return
        if second == b"[" and not 0x40 <= byte <= 0x7E and length < 64:
            return
        self._sequence = b""


class KeyReader:
    """Reads a terminal's keys in a thread while it is entered; ``act`` is called in that thread.

    ``reads`` is False where standard input is no terminal: such a view cannot stop and must say so.
    """

    def __init__(self, act: Callable[[Act], None], monotonic: Callable[[], float],
                 descriptor: int | None = None) -> None:
        self._act, self._monotonic = act, monotonic
        self._descriptor = _stdin() if descriptor is None else descriptor
        self.reads = self._descriptor >= 0 and os.isatty(self._descriptor)
        self._before: list[Any] | None = None
        self._wake = (-1, -1)
        self._thread: threading.Thread | None = None

    def __enter__(self) -> Self:
        if self.reads:
            self._before = termios.tcgetattr(self._descriptor)
            tty.setcbreak(self._descriptor, termios.TCSANOW)
            _without_signals_and_flow(self._descriptor)
            self._wake = os.pipe()
            self._thread = threading.Thread(target=self._read, name="keys", daemon=True)
            self._thread.start()
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None,
                 trace: TracebackType | None) -> None:
        if self._thread is None:
            return
        os.write(self._wake[1], b"x")
        self._thread.join(timeout=1.0)
        # at once: waiting for the output to drain would wait for ever on a terminal that takes none
        termios.tcsetattr(self._descriptor, termios.TCSANOW, self._before or [])
        for end in self._wake:
            os.close(end)

    def _read(self) -> None:
        parser = KeyParser()
        while True:
            ready, _, _ = select.select([self._descriptor, self._wake[0]], [], [])
            if self._wake[0] in ready:
                return
            try:
                data = os.read(self._descriptor, 256)
            except OSError:
                data = b""
            if not data:
                self.reads = False
                return
            for act in parser.feed(data, self._monotonic()):
                self._act(act)


def _without_signals_and_flow(descriptor: int) -> None:
    """Let Ctrl-C arrive as a key, and Ctrl-S not freeze the picture."""
    modes = termios.tcgetattr(descriptor)
    modes[0] &= ~(termios.IXON | termios.IXOFF)
    modes[3] &= ~termios.ISIG
    termios.tcsetattr(descriptor, termios.TCSANOW, modes)


def _stdin() -> int:
    try:
        return sys.stdin.fileno()
    except (AttributeError, ValueError, OSError):
        return -1
