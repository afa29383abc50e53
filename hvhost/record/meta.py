"""What a run's META entry and its notes say: the one place where their JSON keys are written (FORMAT.md, 4 and 5).

The scales here are enough to turn codes into volts and amps without a bench file.
"""

from collections.abc import Mapping
from dataclasses import dataclass, field, fields, is_dataclass
from enum import Enum
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hvhost.record.entries import Json, NoteEntry
from hvhost.words.errors import RecordFault

FORMAT = 1
PHASES = ("begin", "clock start", "clock stop", "clock restart", "end")


@dataclass(frozen=True, slots=True, kw_only=True)
class RecordedScale:
    """One monitor: SI = gain * (raw code - zero), oriented; uncertainties are standard ones (k = 1)."""

    gain: float  # V or A per code; carries the monitor's sign
    zero: float  # raw code at zero volts or amps
    u_gain: float  # relative
    u_zero: float  # V or A
    code_low: int  # a code at or beyond these limits says nothing
    code_high: int

    def values(self, codes: NDArray[np.int32]) -> NDArray[np.float64]:
        """Oriented volts or amps of raw codes."""
        return np.asarray(self.gain * (codes.astype(np.float64) - self.zero))

    def off_limits(self, codes: NDArray[np.int32]) -> NDArray[np.bool_]:
        """Whether each code lies between the converter's limits and not on them."""
        return np.asarray((codes > self.code_low) & (codes < self.code_high), dtype=np.bool_)

    @classmethod
    def of(cls, scale: Any) -> "RecordedScale":
        """Take the numbers of a bench's monitor scale (any object with these attributes)."""
        return cls(**{f.name: getattr(scale, f.name) for f in fields(cls)})


@dataclass(frozen=True, slots=True, kw_only=True)
class RunMeta:
    """Everything that was fixed before a run; ``to_json`` is the META entry's content."""

    run: str  # the run's number, as in the folder's name
    tag: int  # 32-bit tag carried by the arm
    kind: str  # 'plan', 'direct', 'calibration', 'check' or 'rehearsal'
    opened_utc_ns: int
    opened_mono_s: float
    operator: str
    polarity: int  # +1 or -1; all SI values of the record are magnitudes in this direction
    tick_hz: float
    sample_ticks: int
    signs: str  # converters of voltage and current: 's' signed, 'u' unsigned
    voltage: RecordedScale
    current: RecordedScale
    v_program: RecordedScale  # the words: SI = gain * (word - zero)
    i_program: RecordedScale
    bench: Json  # file, text, sha256, and what a measure needs: ripple_hz, bandwidth_hz, output_f, cable_f ...
    plan: Json | None  # file, text, sha256
    sheet: Json | None  # file, text, sha256, specimen, order, second_person, environment ...
    hashes: Mapping[str, str]
    settings: tuple[int, ...]  # the MCU's settings in table order
    greeting: Json
    program: Json | None
    reasons: tuple[Json, ...] = ()  # findings overridden: grade, file, line, what, topic, reason, by
    notes: tuple[Json, ...] = ()  # findings that only inform
    supervisor_state: Json = field(default_factory=dict)
    software: str = ""

    def to_json(self) -> dict[str, Any]:
        """Return the META entry's object."""
        return {"format": FORMAT, **{f.name: jsonable(getattr(self, f.name)) for f in fields(self)}}

    @classmethod
    def of(cls, data: Json) -> "RunMeta":
        """Read a META entry's object; raises `RecordFault` where a key is absent or of another form."""
        try:
            if data["format"] != FORMAT:
                raise RecordFault(f"format {FORMAT}", str(data["format"]), "META entry")
            values = {f.name: data[f.name] for f in fields(cls)}
            for name in ("voltage", "current", "v_program", "i_program"):
                values[name] = RecordedScale(**values[name])
            for name in ("settings", "reasons", "notes"):
                values[name] = tuple(values[name])
            return cls(**values)
        except (KeyError, TypeError) as error:
            raise RecordFault("a META entry with every key of its table", f"{error}", "META entry") from None


def jsonable(value: Any) -> Any:
    """Return plain JSON of frozen dataclasses, enums and containers; each dataclass says its ``type``.

    The types of a recorded scale and of META itself are implied and left out.
    """
    if isinstance(value, RecordedScale):
        return {f.name: getattr(value, f.name) for f in fields(value)}
    if is_dataclass(value) and not isinstance(value, type):
        return {"type": type(value).__name__, **{f.name: jsonable(getattr(value, f.name)) for f in fields(value)}}
    if isinstance(value, Enum):
        return value.value
    if isinstance(value, Mapping):
        return {str(jsonable(key)): jsonable(item) for key, item in value.items()}
    if isinstance(value, set | frozenset):
        return sorted((jsonable(item) for item in value), key=str)
    if isinstance(value, tuple | list):
        return [jsonable(item) for item in value]
    return value


def note(what: str, t_mono: float, utc_ns: int, **more: Any) -> NoteEntry:
    """Return a note; the words of ``what`` and their fields stand in FORMAT.md, section 5."""
    return NoteEntry(utc_ns, {"what": what, "t_mono": t_mono, "utc_ns": utc_ns,
                              **{key: jsonable(item) for key, item in more.items()}})


def step_note(t_mono: float, utc_ns: int, *, number: int, name: str, phase: str, index: int, tick: int,
              **more: Any) -> NoteEntry:
    """Return the note of a step's begin or end (``phase``), at the sample index and tick where it happened.

    More fields: ``step_kind`` ('ramp', 'hold', 'rest', 'retreat'), ``attempt`` (holds that restart), ``result``.
    """
    if phase not in PHASES:
        raise RecordFault(" or ".join(PHASES), repr(phase), "step note")
    return note("step", t_mono, utc_ns, number=number, name=name, phase=phase, index=index, tick=tick, **more)
