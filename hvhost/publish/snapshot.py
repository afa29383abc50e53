"""The one frozen picture of a bench that every outlet renders: screen, local socket, brokers, instruments.

Whoever publishes builds a whole new :class:`Snapshot` and hands it on; nobody changes one.  Volts and amps are
oriented magnitudes (positive in the direction of the bench's polarity); the sign is put on by whoever renders.
Seconds named ``*_s`` are spans, except ``now_s`` and the trend's times, which share the host's monotonic scale, so
that a wall clock that jumps changes nothing (S10).  ``utc_ns`` is nanoseconds since 1970 UTC.

``to_json`` gives plain values (dict, list, str, int, float, bool, None) that a strict JSON encoder takes: a value
that is not finite becomes None, never a number.  ``from_json`` takes them back, skips fields that it does not know
and raises :class:`WireFault` for a value of the wrong kind.
"""

from dataclasses import dataclass, fields
from enum import StrEnum
from typing import Any, NamedTuple, Self, cast

from hvhost.publish.spans import SpanView
from hvhost.publish.values import plain as plain
from hvhost.publish.values import typed

EVENTS_KEPT = 50  # lines of events in a snapshot: a wall monitor's height
TREND_KEPT = 240  # buckets of the trend: two per braille cell of a wide screen
COURSE_KEPT = 120  # corners of the plan's course that is still to come
EVIDENCE_KEPT = 120  # buckets of the last arc's or trip's snapshot


class LinkState(StrEnum):
    """The host's relation to the MCU."""

    NONE = "none"
    GREETED = "greeted"
    OBSERVE = "observe only"
    LOST = "lost"


class Permission(StrEnum):
    """How far the leave to energise has come."""

    IDLE = "idle"
    REQUESTED = "requested"
    PROVING = "proving"
    WARNING = "warning"
    RUNNING = "running"
    PAUSING = "pausing"
    LOWERING = "lowering"


class Phase(StrEnum):
    """What a running run does at the moment."""

    NONE = ""
    RAMP = "ramp"
    HOLD = "hold"
    RETREAT = "retreat"
    REST = "rest"


class VoltageState(StrEnum):
    """What is known of the voltage on the specimen; never a leave to touch (S6)."""

    PRESENT = "present"
    FALLING = "falling"
    BELOW = "below threshold"
    GROUNDED = "grounded"
    UNKNOWN = "unknown"
    NOT_MEASURED = "not measured here"
    LOST = "measurement lost"


class InputJudgement(StrEnum):
    """Whether an input is where arming needs it."""

    OK = "ok"
    NOT_OK = "not ok"
    UNKNOWN = "unknown"


class Severity(StrEnum):
    """How loud an event line is."""

    NOTE = "note"
    ATTENTION = "attention"
    TRIP = "trip"


class StopState(StrEnum):
    """What became of the last cut (S7)."""

    NONE = ""
    CUT_SENT = "cut sent"
    CUT_CONFIRMED = "cut confirmed"
    CUT_NOT_CONFIRMED = "cut not confirmed: use the emergency switching off"


class TrendBucket(NamedTuple):
    """Extremes over one stretch of time that ends at ``t_s`` (host monotonic seconds); no peak is averaged away."""

    t_s: float
    v_min: float
    v_max: float
    i_min: float
    i_max: float


class CoursePoint(NamedTuple):
    """A corner of the course that the plan is to take: volts at ``t_s`` (host monotonic seconds), lines between."""

    t_s: float
    volts: float


@dataclass(frozen=True, slots=True, kw_only=True)
class EvidenceView:
    """The MCU's last snapshot at the converter's full rate: ``points`` with ``t_s`` counted from the trigger.

    ``kind`` is 'arc' or 'trip'; ``span_s`` is the stretch of one bucket (no peak within it is averaged away);
    ``number`` is the MCU's; ``lost`` says that a later one overwrote another before it was stored.
    """

    kind: str
    number: int
    text: str = ""
    span_s: float = 0.0
    points: tuple[TrendBucket, ...] = ()
    lost: bool = False


@dataclass(frozen=True, slots=True, kw_only=True)
class Reading:
    """The last block's readback: means, extremes, standard uncertainties (k = 1) and age at the snapshot's time."""

    volts: float | None
    amps: float | None
    u_volts: float | None = None
    u_amps: float | None = None
    volts_min: float | None = None
    volts_max: float | None = None
    amps_min: float | None = None
    amps_max: float | None = None
    age_s: float
    flags: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class InputView:
    """One interlock or other input by name: the state in words and whether it is where arming needs it."""

    name: str
    state: str
    judgement: InputJudgement = InputJudgement.UNKNOWN


@dataclass(frozen=True, slots=True, kw_only=True)
class HoldView:
    """The hold clock: ``clock`` is 'continuous' or 'accumulate'; ``inside`` says that it counts now.

    ``begun`` is False until the mean enters ``tolerance`` (a fraction) of ``volts``, and again after a restart;
    ``step_s`` is the time since the step began, which ends at ``at_most_s`` in any case.
    """

    elapsed_s: float
    required_s: float
    clock: str = "continuous"
    at_most_s: float | None = None
    inside: bool = True
    begun: bool = True
    restarts: int = 0
    volts: float | None = None
    tolerance: float | None = None
    step_s: float | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class RunView:
    """The run that stands, or the last one until the next arm.

    ``remaining_s`` is the longest that it may still take, pauses and retreats included; ``expected_s`` is what is to
    come if nothing hinders it (None: not known).
    """

    run_id: str
    kind: str = "plan"
    plan: str = ""
    specimen: str = ""
    operator: str = ""
    step_number: int = 0
    step_total: int = 0
    step_name: str = ""
    step_text: str = ""
    elapsed_s: float = 0.0
    remaining_s: float | None = None
    expected_s: float | None = None
    hold: HoldView | None = None
    next_reading_s: float | None = None
    arcs: int = 0
    arcs_allowed: int | None = None
    folder: str = ""
    ended: bool = False


@dataclass(frozen=True, slots=True, kw_only=True)
class ArmView:
    """An open request to energise, as the display beside the arm input must name it."""

    plan: str
    specimen: str
    volts_highest: float
    duration_s: float
    asked_by: str
    expires_s: float
    press_needed: bool = True
    typed_name: str = ""
    simulated_press: bool = False


@dataclass(frozen=True, slots=True, kw_only=True)
class EventLine:
    """One numbered line of what happened; the numbers show an outlet what it missed."""

    utc_ns: int
    text: str
    severity: Severity = Severity.NOTE
    number: int = 0


@dataclass(frozen=True, slots=True, kw_only=True)
class LinkQuality:
    """Counts since the greeting."""

    garbled: int = 0
    gaps: int = 0
    missed: int = 0
    repeated: int = 0


@dataclass(frozen=True, slots=True, kw_only=True)
class RecordView:
    """Whether the recorder keeps up and where it writes."""

    ok: bool = True
    text: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class LoopView:
    """How late the daemon's event loop was (see `publish.stalls`), in seconds.

    ``longest_s`` and ``p999_s`` since it began, ``recent_s`` in about the last hour, ``run_s`` since the run was
    opened; ``own_s`` is the most of a lateness that this process itself can have caused; ``turn_s`` the longest turn
    and ``turn_own_s`` the one that took most processor time (``run_turn_own_s``: since the run was opened);
    ``piece_s`` the longest single piece of work and ``piece`` its name, ``run_piece_own_s`` and ``run_piece`` the one
    that took most processor time since the run was opened; ``read_s`` the median of what one read costs,
    the protective path and all that follows it.
    """

    longest_s: float = 0.0
    recent_s: float = 0.0
    p999_s: float = 0.0
    own_s: float = 0.0
    run_s: float = 0.0
    turn_s: float = 0.0
    turn_own_s: float = 0.0
    run_turn_own_s: float = 0.0
    run_piece: str = ""
    run_piece_own_s: float = 0.0
    piece: str = ""
    piece_s: float = 0.0
    read_s: float = 0.0


@dataclass(frozen=True, slots=True, kw_only=True)
class DiskView:
    """Room on the disk of the runs folder, in bytes: below ``floor_b`` no run is opened, an open one is lowered."""

    free_b: float = 0.0
    floor_b: float = 0.0
    ok: bool = True


@dataclass(frozen=True, slots=True, kw_only=True)
class OutletView:
    """What one outlet could not deliver (S12)."""

    name: str
    dropped: int = 0
    failed: int = 0
    clients: int = 0


@dataclass(frozen=True, slots=True, kw_only=True)
class Snapshot:
    """Everything an outlet may show.  ``polarity`` is +1 or -1; ``pause_s`` counts down to 'WILL RE-ENERGISE'.

    ``block_s`` is the span of one sample block and ``lease_s`` the lease: a reading older than two blocks is shown
    as old, one older than the lease not at all (S13).  ``power_words`` says what stands behind zero: with
    programming alone 'programmed to zero, supply still powered', never 'off'.  ``inhibits_without_mcu`` is what the
    bench file states of the wiring; where it is not so, every screen says it.  ``trend`` is the whole run, ``recent``
    the last minute; ``course`` begins at the present and is what the plan has still to come.  ``stopped_by`` names who
    stopped the bench under the one in control, until that one acknowledges.
    """

    utc_ns: int
    now_s: float
    seq: int
    bench: str
    bench_title: str = ""
    polarity: int = 1
    rehearsal: bool = False
    port: str = ""

    link: LinkState = LinkState.NONE
    link_text: str = ""
    permission: Permission = Permission.IDLE
    phase: Phase = Phase.NONE
    latched: tuple[str, ...] = ()
    voltage: VoltageState = VoltageState.UNKNOWN
    voltage_text: str = ""
    power_words: str = ""
    inhibits_without_mcu: bool = True
    stop: StopState = StopState.NONE

    set_volts: float | None = None
    set_amps: float | None = None
    reading: Reading | None = None
    span: SpanView | None = None
    block_s: float = 0.032
    lease_s: float = 0.5
    volts_full: float = 0.0
    amps_full: float = 0.0
    ceiling_volts: float | None = None
    trip_amps: float | None = None

    inputs: tuple[InputView, ...] = ()
    run: RunView | None = None
    arm: ArmView | None = None
    pause_s: float | None = None
    warning_s: float | None = None
    seat: str = ""
    stopped_by: str = ""
    events: tuple[EventLine, ...] = ()
    trend: tuple[TrendBucket, ...] = ()
    recent: tuple[TrendBucket, ...] = ()
    course: tuple[CoursePoint, ...] = ()
    evidence: EvidenceView | None = None
    next_acts: tuple[str, ...] = ()
    cautions: tuple[str, ...] = ()
    discharge_text: str = ""
    bleeds_passed: float | None = None
    verdict_text: str = ""
    quality: LinkQuality = LinkQuality()
    record: RecordView = RecordView()
    outlets: tuple[OutletView, ...] = ()
    loop: LoopView = LoopView()
    disk: DiskView = DiskView()

    def to_json(self) -> dict[str, Any]:
        """Return plain values; not-finite numbers become None."""
        return {field.name: plain(getattr(self, field.name)) for field in fields(self)}

    @classmethod
    def from_json(cls, data: object) -> Self:
        """Return the snapshot that ``to_json`` wrote; raises WireFault at the field that is of the wrong kind."""
        return cast(Self, typed(data, cls, "snapshot"))
