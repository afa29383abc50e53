"""The one frozen picture of a bench that every outlet renders: screen, local socket, brokers, instruments.

Whoever publishes builds a whole new :class:`Snapshot` and hands it on; nobody changes one.  Volts and amps are
oriented magnitudes (positive in the direction of the bench's polarity); the sign is put on by whoever renders.
Seconds named ``*_s`` are spans, except ``now_s`` and the trend's times, which share the host's monotonic scale, so
that a wall clock that jumps changes nothing (S10).  ``utc_ns`` is nanoseconds since 1970 UTC.

``to_json`` gives plain values (dict, list, str, int, float, bool, None) that a strict JSON encoder takes: a value
that is not finite becomes None, never a number.  ``from_json`` takes them back, skips fields that it does not know
and raises :class:`WireFault` for a value of the wrong kind.
"""

import math
import types
import typing
from dataclasses import dataclass, fields, is_dataclass
from enum import StrEnum
from functools import cache
from typing import Any, NamedTuple, Self

from hvhost.words.errors import WireFault

EVENTS_KEPT = 50  # lines of events in a snapshot: a wall monitor's height
TREND_KEPT = 240  # buckets of the trend: two per braille cell of a wide screen


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
    """The hold clock: ``clock`` is 'continuous' or 'accumulate'; ``inside`` says that it counts now."""

    elapsed_s: float
    required_s: float
    clock: str = "continuous"
    at_most_s: float | None = None
    inside: bool = True


@dataclass(frozen=True, slots=True, kw_only=True)
class RunView:
    """The run that stands, or the last one until the next arm."""

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
    opened; ``own_s`` is the most of a lateness that this process itself can have caused; ``turn_s`` the longest turn,
    ``piece_s`` the longest single piece of work and ``piece`` its name.
    """

    longest_s: float = 0.0
    recent_s: float = 0.0
    p999_s: float = 0.0
    own_s: float = 0.0
    run_s: float = 0.0
    turn_s: float = 0.0
    piece: str = ""
    piece_s: float = 0.0


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
    programming alone 'programmed to zero, supply still powered', never 'off'.
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
    stop: StopState = StopState.NONE

    set_volts: float | None = None
    set_amps: float | None = None
    reading: Reading | None = None
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
    events: tuple[EventLine, ...] = ()
    trend: tuple[TrendBucket, ...] = ()
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
        return typing.cast(Self, _typed(data, cls, "snapshot"))


@cache
def _hints(kind: type) -> dict[str, Any]:
    """Return field name -> resolved type of a dataclass."""
    return typing.get_type_hints(kind)


def plain(value: Any) -> Any:
    """Return a field's value as plain JSON values; not-finite numbers become None."""
    if isinstance(value, StrEnum):
        return str(value)
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    if isinstance(value, tuple):
        return [plain(item) for item in value]
    if is_dataclass(value):
        return {field.name: plain(getattr(value, field.name)) for field in fields(value)}
    return value


def _typed(value: Any, kind: Any, place: str) -> Any:
    """Return ``value`` as an instance of the annotation ``kind``, or raise WireFault naming ``place``."""
    origin = typing.get_origin(kind)
    if origin in (types.UnionType, typing.Union):
        inner = next(part for part in typing.get_args(kind) if part is not type(None))
        return None if value is None else _typed(value, inner, place)
    if origin is tuple:
        item = typing.get_args(kind)[0]
        return tuple(_typed(part, item, f"{place}[{n}]") for n, part in enumerate(_need(value, list, place)))
    if issubclass(kind, StrEnum):
        try:
            return kind(_need(value, str, place))
        except ValueError:
            raise WireFault(" | ".join(map(repr, map(str, kind))), repr(value)[:60], place) from None
    if is_dataclass(kind):
        return _typed_fields(_need(value, dict, place), kind, place)
    if issubclass(kind, TrendBucket):
        numbers = [_typed(part, float, place) for part in _need(value, list, place)]
        if len(numbers) != len(TrendBucket._fields):
            raise WireFault("five numbers", f"{len(numbers)}", place)
        return TrendBucket(*numbers)
    if kind is float:
        return float(_need(value, (int, float), place))
    return _need(value, kind, place)


def _typed_fields(data: dict[str, Any], kind: Any, place: str) -> Any:
    hints = _hints(kind)
    known = {name: _typed(data[name], hints[name], f"{place}.{name}") for name in hints if name in data}
    try:
        return kind(**known)
    except TypeError:
        missing = sorted(name for name in hints if name not in data)
        raise WireFault("every field without a default", f"missing among {', '.join(missing)}"[:200], place) from None


def _need(value: Any, kind: Any, place: str) -> Any:
    if (isinstance(value, bool) and kind is not bool) or not isinstance(value, kind):
        wanted = "number" if isinstance(kind, tuple) else kind.__name__
        raise WireFault(wanted, repr(value)[:60], place)
    return value
