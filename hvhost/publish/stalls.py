"""How late the event loop is: a gauge of its own, always on, in bounded memory.

Three figures, since one alone misleads:

* *Lateness*: a timer is set for a due time and says how much later it ran.  This is what a stop waits for when it
  comes at the worst moment.  It holds everything: our own long callbacks, other threads that hold the interpreter,
  and the machine, which may not run us at all.
* *Own part of the lateness*: the processor time that this whole process used since the timer ran last, at most the
  lateness.  It bounds from above what we ourselves can have caused; the rest is the machine's.
* *Turns and pieces*: wall and processor time of one turn of the loop (everything between two looks at the
  descriptors), the longest of each by itself, and both times of the named pieces of work in it, so that the longest
  single callback has a name.  Wall time holds what the machine did meanwhile; processor time is our own doing.

A stall counts once: beats that fell into it are not made up for.  Percentiles come from counts in buckets a quarter
of an octave wide, so they are read within 19 %.
"""

import asyncio
import math
import selectors
import time
from collections import deque
from collections.abc import Callable
from functools import wraps
from typing import Any, ParamSpec, TypeVar

from hvhost.publish.snapshot import LoopView

PERIOD_S = 0.01
FINEST_S = 1e-6
PER_OCTAVE = 4
BUCKETS = PER_OCTAVE * 28 + 1  # to 268 s: whatever is longer counts as that
RECENT_SPAN_S = 600.0
RECENT_SPANS = 6  # the worst of the last hour, give or take ten minutes
PIECES_MAX = 32
READ = "read"  # the piece that is the protective path
VIEW_S = 1.0

P = ParamSpec("P")
R = TypeVar("R")


class Spread:
    """Counts of durations in buckets of a quarter octave, and the longest."""

    __slots__ = ("_counts", "count", "longest_s")

    def __init__(self) -> None:
        self._counts = [0] * BUCKETS
        self.count = 0
        self.longest_s = 0.0

    def add(self, seconds: float) -> None:
        """Count one duration."""
        at = int(PER_OCTAVE * math.log2(seconds / FINEST_S)) + 1 if seconds > FINEST_S else 0
        self._counts[min(at, BUCKETS - 1)] += 1
        self.count += 1
        if seconds > self.longest_s:
            self.longest_s = seconds

    def quantile(self, share: float) -> float:
        """The upper edge of the bucket below which this share lies, at most the longest; 0 where there is none."""
        wanted = share * self.count
        seen = 0
        for at, count in enumerate(self._counts):
            seen += count
            if seen >= wanted and seen:
                edge_s: float = FINEST_S * 2.0 ** (at / PER_OCTAVE)
                return min(self.longest_s, edge_s)
        return self.longest_s


class StallGauge:
    """See the module's text; ``processor`` gives the seconds of processor time that the process has used."""

    def __init__(self, processor: Callable[[], float] = time.process_time) -> None:
        self._processor = processor
        self.late, self.turns = Spread(), Spread()
        self.own_s = 0.0  # the longest own part of a lateness
        self.turn_s = self.turn_processor_s = 0.0
        self.run_s = self.run_turn_own_s = 0.0  # the longest lateness, and turn, since a run was opened
        self.run_piece = ("", 0.0)  # and the piece of work that took most processor time
        self._opening = False
        self.pieces: dict[str, Spread] = {}
        self._recent: deque[list[float]] = deque(maxlen=RECENT_SPANS)  # [begin, longest]
        self._used_s = processor()
        self._turn: tuple[float, float] | None = None
        self._timer: asyncio.TimerHandle | None = None
        self._view: tuple[float, LoopView] | None = None

    # ------------------------------------------------------------ the beat

    def start(self) -> None:
        """Begin to beat on the running loop; what came before, the start of the program, is forgotten."""
        loop = asyncio.get_running_loop()
        self.turns, self.turn_s, self.turn_processor_s, self._turn = Spread(), 0.0, 0.0, None
        self._beat_at(loop, loop.time() + PERIOD_S)

    def stop(self) -> None:
        """Beat no more."""
        if self._timer is not None:
            self._timer.cancel()
            self._timer = None

    def _beat_at(self, loop: asyncio.AbstractEventLoop, due_s: float) -> None:
        self._used_s = self._processor()
        self._timer = loop.call_at(due_s, self._beat, loop, due_s)

    def _beat(self, loop: asyncio.AbstractEventLoop, due_s: float) -> None:
        now_s = loop.time()
        self.beat(due_s, now_s, self._processor() - self._used_s)
        self._beat_at(loop, max(due_s + PERIOD_S, now_s + PERIOD_S / 2))

    def beat(self, due_s: float, now_s: float, used_s: float) -> None:
        """The timer due at ``due_s`` ran at ``now_s``; the process used so much processor time since the one before."""
        late_s = max(0.0, now_s - due_s)
        self.late.add(late_s)
        self.own_s = max(self.own_s, min(late_s, used_s))
        self.run_s = max(self.run_s, late_s)
        recent = self._recent
        if not recent or now_s - recent[-1][0] >= RECENT_SPAN_S:
            recent.append([now_s, 0.0])
        recent[-1][1] = max(recent[-1][1], late_s)

    @property
    def recent_s(self) -> float:
        """The longest lateness of about the last hour: what a lease is held against."""
        return max((longest for _, longest in self._recent), default=0.0)

    # ------------------------------------------------------------ turns and pieces

    def selector(self) -> selectors.BaseSelector:
        """A selector for the loop that tells this gauge where each turn begins and ends."""
        return _TimedSelector(self)

    def turn_begins(self) -> None:
        """The selector returned: callbacks run from now on."""
        self._turn = (time.perf_counter(), time.thread_time())

    def turn_ends(self) -> None:
        """The loop is about to look at its descriptors again."""
        if self._turn is None:
            return
        seconds = time.perf_counter() - self._turn[0]
        self.turns.add(seconds)
        self.turn_s = max(self.turn_s, seconds)
        own_s = time.thread_time() - self._turn[1]
        self.turn_processor_s = max(self.turn_processor_s, own_s)
        if self._opening:
            self._opening = False
        elif own_s > self.run_turn_own_s:
            self.run_turn_own_s = own_s

    def timed(self, name: str, call: Callable[P, R]) -> Callable[P, R]:
        """The same call, its time counted under this name."""
        spread = self.pieces.setdefault(name, Spread()) if len(self.pieces) < PIECES_MAX else Spread()
        clock, processor = time.perf_counter, time.thread_time

        @wraps(call)
        def measured(*args: P.args, **kwargs: P.kwargs) -> R:
            begun, used = clock(), processor()
            try:
                return call(*args, **kwargs)
            finally:
                spread.add(clock() - begun)
                if (used := processor() - used) > self.run_piece[1] and not self._opening:
                    self.run_piece = (name, used)
        return measured

    # ------------------------------------------------------------ telling

    def run_opened(self) -> None:
        """A run begins: its own worst stall counts from here; the turn that opens it is not yet the run's."""
        self.run_s = self.run_turn_own_s = 0.0
        self.run_piece = ("", 0.0)
        self._opening = True

    def note(self) -> dict[str, Any]:
        """What a run's record keeps, in seconds."""
        view = self.view(float("inf"))
        return {"run_s": self.run_s, "run_turn_own_s": self.run_turn_own_s, "longest_s": view.longest_s,
                "p999_s": view.p999_s, "own_s": view.own_s, "turn_s": view.turn_s, "turn_own_s": view.turn_own_s,
                "piece": view.piece, "piece_s": view.piece_s, "run_piece": view.run_piece,
                "run_piece_own_s": view.run_piece_own_s, "beats": self.late.count}

    def view(self, now_s: float) -> LoopView:
        """What is shown; made anew at most once a second, so that watchers are not told of every microsecond."""
        if self._view is not None and 0.0 <= now_s - self._view[0] < VIEW_S:
            return self._view[1]
        piece, spread = max(self.pieces.items(), key=lambda item: item[1].longest_s, default=("", Spread()))
        view = LoopView(longest_s=round(self.late.longest_s, 5), recent_s=round(self.recent_s, 5),
                        p999_s=round(self.late.quantile(0.999), 5), own_s=round(self.own_s, 5),
                        run_s=round(self.run_s, 5), turn_s=round(self.turn_s, 5),
                        turn_own_s=round(self.turn_processor_s, 5), run_turn_own_s=round(self.run_turn_own_s, 5),
                        piece=piece, piece_s=round(spread.longest_s, 5), run_piece=self.run_piece[0],
                        run_piece_own_s=round(self.run_piece[1], 6),
                        read_s=round(self.pieces[READ].quantile(0.5), 7) if READ in self.pieces else 0.0)
        self._view = (now_s, view)
        return view


class _TimedSelector(selectors.DefaultSelector):
    """The system's selector, with the gauge told before and after."""

    def __init__(self, gauge: StallGauge) -> None:
        super().__init__()
        self._gauge = gauge

    def select(self, timeout: float | None = None) -> list[tuple[selectors.SelectorKey, int]]:
        self._gauge.turn_ends()
        found = super().select(timeout)
        self._gauge.turn_begins()
        return found
