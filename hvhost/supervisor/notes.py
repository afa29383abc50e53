"""What a program's walk tells and is told: the small frozen values between the runner, its parts and the core."""

from dataclasses import dataclass
from enum import StrEnum

from hvhost.plan.program import SegmentTarget, Step
from hvhost.words.values import swift_by_name


class Doing(StrEnum):
    """What the runner is at."""

    WAITING = "waiting"  # not energised yet; the first segments may be queued
    RAMPING = "ramp"
    HOLDING = "hold"
    RETREATING = "retreat"
    RESTING = "rest"
    PAUSED = "pausing"
    DONE = "done"


class What(StrEnum):
    """Kinds of notes."""

    STEP_BEGUN = "step begun"
    STEP_ENDED = "step ended"
    CLOCK_STARTED = "clock started"
    CLOCK_RESTARTED = "clock restarted"
    READING = "reading"
    RETREAT = "retreat"
    FINISHED = "finished"
    FAILED = "failed"


@dataclass(frozen=True, slots=True, kw_only=True)
class Note:
    """One thing that happened in the program, at a tick; volts and amps are oriented means where they apply."""

    what: What
    tick: int
    index: int = 0
    step: Step | None = None
    text: str = ""
    volts: float = 0.0
    amps: float = 0.0
    reading_s: float = 0.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Order:
    """A segment to queue; ``arc`` only on the first one after a pause; ``stretch`` comes back with its answer."""

    target: SegmentTarget
    stretch: int
    arc: int | None = None


@swift_by_name
class Measured:
    """One block as the runner needs it: where it lies in time, and its sums in SI."""

    index: int
    tick: int
    ticks: int  # that the block spans
    pairs: int
    volts: float  # mean
    amps: float  # mean
    volts_max: float

    @property
    def end_tick(self) -> int:
        """The tick behind the block's last pair."""
        return self.tick + self.ticks

    @property
    def end_index(self) -> int:
        """The index behind the block's last pair."""
        return self.index + self.pairs
