"""Blocks of readings as numpy arrays, decoded from the daemon's notifications."""

import math
from base64 import b64decode
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hvhost.words.errors import CannotConnect, CommandRefused

Array = NDArray[np.float32]
ARRAYS = ("volts", "amps", "volts_min", "volts_max", "amps_min", "amps_max")
EVERY_MOST = 100_000
STILL_S = 5.0  # readings that stay away for so long, beyond a stretch of theirs, are told
SLOWEST_S = 0.01  # from sample to sample: no bench file allows fewer than 100 a second


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Readings:
    """Consecutive samples, or stretches of ``every`` samples with mean (``volts``, ``amps``), least and greatest value.

    Magnitudes in the direction of the bench's polarity.  ``missing`` samples were lost between board and daemon before
    the first of these; ``dropped`` counts those that were there and that this script did not take in time, since it
    began to read.
    """

    index: int  # of the first sample, unwrapped
    tick: int  # MCU tick of the first sample, unwrapped
    utc_ns: int  # UTC of the first sample
    every: int
    sample_s: float  # from sample to sample
    volts: Array
    amps: Array
    volts_min: Array
    volts_max: Array
    amps_min: Array
    amps_max: Array
    state: str  # of the MCU: 'energised', 'off', ...
    latched: bool
    flags: tuple[str, ...]  # what is odd about one of the samples or more
    missing: int
    dropped: int

    def __len__(self) -> int:
        return len(self.volts)

    @property
    def indices(self) -> NDArray[np.int64]:
        """Index of the first sample of each point; all but the first divide by ``every``."""
        at = self.index + self.every * np.arange(len(self), dtype=np.int64)
        at[1:] -= self.index % self.every
        return at

    @property
    def t_s(self) -> NDArray[np.float64]:
        """Seconds of each point since the first sample of the board's count."""
        return np.asarray(self.indices * self.sample_s)

    @property
    def t(self) -> "NDArray[np.datetime64]":
        """UTC of each point."""
        spans = np.rint((self.indices - self.index) * self.sample_s * 1e9).astype("timedelta64[ns]")
        return np.asarray(np.datetime64(self.utc_ns, "ns") + spans)

    @property
    def last_index(self) -> int:
        """Index at which the last point begins."""
        return int(self.indices[-1])


def readings_in(message: Any) -> Readings | None:
    """Return the readings of a notification, None for any other; raises `CannotConnect` for one of another form."""
    if not isinstance(message, dict) or message.get("method") != "readings":
        return None
    try:
        return _decoded(message["params"])
    except (KeyError, TypeError, ValueError):
        raise CannotConnect("readings of this version", "another form", "readings", "is it a daemon of ours?") from None


def _decoded(p: dict[str, Any]) -> Readings:
    arrays: dict[str, Array] = {name: np.frombuffer(b64decode(p[name], validate=True), dtype="<f4")
                                for name in ARRAYS if name in p}
    for name in ("volts", "amps"):
        arrays.setdefault(f"{name}_min", arrays[name])
        arrays.setdefault(f"{name}_max", arrays[name])
    if {len(array) for array in arrays.values()} != {int(p["points"])} or not p["points"]:
        raise ValueError("arrays of one length")
    return Readings(index=int(p["index"]), tick=int(p["tick"]), utc_ns=int(p["utc_ns"]), every=int(p["every"]),
                    sample_s=float(p["sample_s"]), state=str(p["state"]), latched=bool(p["latched"]),
                    flags=tuple(map(str, p["flags"])), missing=int(p["missing"]), dropped=int(p["dropped"]), **arrays)


def still_s(every: int) -> float:
    """Seconds after which readings of this stretch have stayed away for too long."""
    return STILL_S + every * SLOWEST_S


class Span:
    """Says when readings of so many seconds, by the board's own time, are complete."""

    def __init__(self, every: int, seconds: float | None) -> None:
        if isinstance(every, bool) or not isinstance(every, int) or not 1 <= every <= EVERY_MOST:
            raise CommandRefused(f"a whole number from 1 to {EVERY_MOST}", repr(every)[:40], "every")
        if seconds is not None and not (seconds > 0.0 and math.isfinite(seconds)):
            raise CommandRefused("more than 0 s", repr(seconds)[:40], "seconds")
        self._seconds = seconds
        self._first: int | None = None

    def over(self, block: Readings) -> bool:
        """Whether this block is the last one."""
        if self._first is None:
            self._first = block.index
        if self._seconds is None:
            return False
        return (block.last_index + block.every - self._first) * block.sample_s >= self._seconds
