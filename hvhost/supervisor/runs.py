"""One run from its opening to its close: what was permitted, how far it came, why it ended."""

from dataclasses import dataclass, field
from enum import StrEnum

from hvhost.plan.program import Program
from hvhost.supervisor.runner import Runner
from hvhost.wire.vocabulary import HostRule, cause_words


class Stage(StrEnum):
    """Where a run stands."""

    PREPARED = "prepared"  # checked and recorded, not armed
    ARMED = "armed"  # requested, proving, warning
    LIVE = "live"  # energised at least once, not yet cut for good
    DISCHARGING = "discharging"  # cut; the voltage is followed
    CLOSED = "closed"


class Outcome(StrEnum):
    """How a run ended; the words are those of the record."""

    FINISHED = "finished"
    LOWERED = "lowered"
    CUT = "cut"
    TRIPPED = "tripped"
    INTERRUPTED = "interrupted"
    RECORD_FAILED = "record failed"
    CANCELLED = "cancelled"
    FAILED = "failed"


@dataclass(frozen=True, slots=True, kw_only=True)
class RunSpec:
    """What one arm may cover: exactly what preflight passed."""

    run_id: str
    kind: str  # 'plan', 'direct', 'calibration', 'check'
    plan: str  # title, or 'direct run'
    specimen: str
    operator: str
    tag: int  # 32 bits, carried by the arm
    program: Program
    digest: str  # one hash over plan, sheet, bench, calibration
    reasons: tuple[str, ...] = ()  # reason texts with names


@dataclass(slots=True, kw_only=True)
class ActiveRun:
    """A run in progress; only the core changes it."""

    spec: RunSpec
    runner: Runner
    stage: Stage = Stage.PREPARED
    outcome: Outcome | None = None
    why: str = ""
    asked_by: str = ""
    arm: int = 0
    arm_tries: int = 0
    requested_s: float | None = None
    energised_tick: int | None = None
    cut_tick: int | None = None
    arc_tick: int | None = None  # of the breakdown that ended it, as judged
    causes: int = 0
    host_rule: int = 0
    arcs: int = 0
    arm_ticket: int = 0
    segment_tickets: set[int] = field(default_factory=set)

    @property
    def ended(self) -> bool:
        """Whether the outcome is settled (the discharge may still be followed)."""
        return self.outcome is not None

    def end(self, outcome: Outcome, why: str) -> None:
        """Settle the outcome; the first reason stands, except that a trip outranks an operator's or a plan's end."""
        if self.outcome is None or (outcome is Outcome.TRIPPED and self.outcome in (
                Outcome.FINISHED, Outcome.LOWERED, Outcome.CUT, Outcome.FAILED)):
            self.outcome, self.why = outcome, why

    def cause_text(self) -> str:
        """The latched causes in words, with the host's rule where one cut."""
        words = [w if w != "host" else f"host: {HostRule(self.host_rule).name.lower().replace('_', ' ')}"
                 for w in cause_words(self.causes)]
        return ", ".join(words)
