"""One run from its opening to its close: what was permitted, how far it came, why it ended."""

from dataclasses import dataclass, field
from enum import StrEnum

from hvhost.plan.program import Program
from hvhost.supervisor.runner import Runner
from hvhost.wire.vocabulary import HOST_RULE_WORDS, HostRule, cause_words


class Stage(StrEnum):
    """Where a run stands."""

    PREPARED = "prepared"  # checked and recorded, not armed
    ARMED = "armed"  # requested, proving, warning
    LIVE = "live"  # energised at least once, not yet cut for good
    DISCHARGING = "discharging"  # cut; the voltage is followed
    CLOSED = "closed"


OPEN = (Stage.ARMED, Stage.LIVE)


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


# The first outcome stands, but a later one takes the place of these while the end is still under way: what happens on
# the way down belongs to the run.  An interruption is told by who was not there to see the rest.
OUTRANKED: dict[Outcome, frozenset[Outcome]] = {
    Outcome.TRIPPED: frozenset({Outcome.FINISHED, Outcome.LOWERED, Outcome.CUT, Outcome.FAILED,
                                Outcome.CANCELLED}),
    Outcome.INTERRUPTED: frozenset({Outcome.FINISHED, Outcome.LOWERED}),
    Outcome.CUT: frozenset({Outcome.LOWERED}),
}


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
    arm_again: bool = False  # refused as stale: asked once more when the next block has told the last event
    requested_s: float | None = None
    energised_tick: int | None = None
    cut_tick: int | None = None
    arc_tick: int | None = None  # of the breakdown that ended it, as judged
    causes: int = 0
    host_rule: int = 0
    arcs: int = 0
    arm_ticket: int = 0
    segments: dict[int, int] = field(default_factory=dict)  # ticket of each unanswered segment: the runner's stretch

    @property
    def ended(self) -> bool:
        """Whether the outcome is settled (the discharge may still be followed)."""
        return self.outcome is not None

    @property
    def open(self) -> bool:
        """Whether the run is armed or live."""
        return self.stage in OPEN

    def end(self, outcome: Outcome, why: str) -> None:
        """Settle the outcome; see `OUTRANKED`; a closed run's stands for ever."""
        if self.stage is Stage.CLOSED:
            return
        if outcome is Outcome.INTERRUPTED and self.stage is Stage.DISCHARGING and self.ended:
            return  # the end itself was seen
        if self.outcome is None or self.outcome in OUTRANKED.get(outcome, ()):
            self.outcome, self.why = outcome, why

    def cause_text(self) -> str:
        """The latched causes in words, with the host's rule where one cut."""
        return ", ".join(told_causes(self.causes, self.host_rule))


def rule_word(rule: int) -> str:
    """The word of a host's rule; a number that this version does not know is told as such."""
    return HOST_RULE_WORDS[HostRule(rule)] if rule in set(HostRule) else f"rule {rule}"


def told_causes(causes: int, rule: int) -> tuple[str, ...]:
    """The words of a set of causes, the host's with its rule."""
    return tuple(f"host: {rule_word(rule)}" if word == "host" else word for word in cause_words(causes))
