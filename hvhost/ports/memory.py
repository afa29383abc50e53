"""A station and a stand-in joined in memory under a virtual clock: the same core, faster than real time.

Bytes pass at the tick at which they are ready; a step is one sample of the stand-in, so the result depends on the
seed and on nothing of this machine.
"""

from collections.abc import Callable
from typing import Protocol

from hvhost.publish.station import Station
from hvhost.words.clocks import VirtualClock

LOOK_EVERY_S = 0.25  # virtual seconds between two looks of whoever drives


class Board(Protocol):
    """What a stand-in is to a wire in memory."""

    def advance_to(self, tick: int) -> None:
        """Let time pass."""
        ...

    def feed(self, data: bytes) -> None:
        """Take bytes of the host."""
        ...

    def take_output(self) -> bytes:
        """Return bytes for the host."""
        ...


class MemoryLine:
    """Drives both ends; ``station`` is set once, since it needs the line's `write`."""

    def __init__(self, board: Board, clock: VirtualClock, tick_hz: int, sample_ticks: int) -> None:
        self.board, self.clock = board, clock
        self.station: Station | None = None
        self.tick = 0
        self._step = sample_ticks
        self._ns = 1_000_000_000 // tick_hz
        self._waiting = bytearray()

    def write(self, data: bytes) -> bytes:
        """The host's bytes reach the board before its next sample; nothing is ever left over."""
        self._waiting += data
        return b""

    def run(self, look: Callable[[], bool], for_s: float) -> bool:
        """Go on until ``look()`` says that it is enough, at most for so many virtual seconds; False when not enough."""
        station, board, clock = self.station, self.board, self.clock
        assert station is not None
        end_ns = clock.elapsed_ns + round(for_s * 1e9)
        look_ns = clock.elapsed_ns
        due = station.deadline()
        step, step_ns = self._step, self._step * self._ns
        while clock.elapsed_ns < end_ns:
            if self._waiting:
                data, self._waiting = bytes(self._waiting), bytearray()
                board.feed(data)
            self.tick += step
            clock.elapsed_ns += step_ns
            board.advance_to(self.tick)
            out = board.take_output()
            if out:
                station.feed(out)
                due = station.deadline()
            elif due is not None and clock.elapsed_ns / 1e9 >= due:
                station.tick()
                due = station.deadline()
            if clock.elapsed_ns >= look_ns:
                look_ns = clock.elapsed_ns + round(LOOK_EVERY_S * 1e9)
                if look():
                    return True
                due = station.deadline()
        return look()
