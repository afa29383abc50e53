"""Sample blocks: oriented codes with their gaps and flags marked, assembled from the wire's blocks.

The wire counts samples and ticks in 32 bits that wrap; here they are plain integers that never do.  A missed
conversion takes a sample index of its own, so indices and ticks stay in step: any step of the index that the
blocks do not fill is a gap, whoever lost the pairs.
"""

from dataclasses import dataclass, field
from enum import IntFlag
from typing import Protocol

from hvhost.wire.frames import Block
from hvhost.wire.settings import Settings
from hvhost.words.values import swift_by_name

FAR = 1 << 40  # beyond every code


class Flags(IntFlag):
    """What is odd about a block; the pairs that are meant are found again by `Orientation`."""

    LIMIT_V = 1 << 0  # a voltage code stands at the converter's limit
    LIMIT_I = 1 << 1
    REVERSED_V = 1 << 2  # a voltage code of the wrong sign beyond the zero band
    REVERSED_I = 1 << 3
    STALE = 1 << 4  # the block arrived later than a reading may be old
    GAP = 1 << 5  # pairs are missing before this block
    MISSED = 1 << 6  # the MCU counted missed conversions since the block before
    REPEATED = 1 << 7  # a repeated or backward block was refused before this one


class ConverterInfo(Protocol):
    """What the greeting tells about the converters: 's' or 'u' per channel, and their bits."""

    @property
    def signs(self) -> str: ...
    @property
    def v_bits(self) -> int: ...
    @property
    def i_bits(self) -> int: ...


@dataclass(frozen=True, slots=True, kw_only=True)
class Orientation:
    """How raw monitor codes become oriented ones: ``oriented = sign * (raw - zero)``; the limits are raw codes."""

    v_sign: int
    v_zero: int
    i_sign: int
    i_zero: int
    v_limits: tuple[int, int]  # raw codes at which the converter clips, low and high
    i_limits: tuple[int, int]
    v_band: int  # oriented codes below -band are reversed
    i_band: int

    @classmethod
    def of(cls, settings: Settings, info: ConverterInfo) -> "Orientation":
        """Derive the orientation from the settings in force and the greeting's converter page."""
        return cls(v_sign=1 if settings["vmap"] >= 0 else -1, v_zero=settings["vzero"],
                   i_sign=1 if settings["imap"] >= 0 else -1, i_zero=settings["izero"],
                   v_limits=raw_limits(info.signs[0], info.v_bits), i_limits=raw_limits(info.signs[1], info.i_bits),
                   v_band=settings["zeroband"], i_band=settings["zeroband"])

    def raw_bounds(self, *, voltage: bool) -> tuple[int, int, int, int]:
        """Return (low, high, reversed_low, reversed_high) in raw codes of one channel.

        Codes at or beyond ``low`` and ``high`` stand at the converter's limit; codes below ``reversed_low`` or above
        ``reversed_high`` are reversed.  An end of the converter inside the zero band is no limit: that is where such
        a chain reads zero (it cannot show a reversed readback at all, which the bench review says).
        """
        sign, zero, band = (self.v_sign, self.v_zero, self.v_band) if voltage else (
            self.i_sign, self.i_zero, self.i_band)
        low, high = self.v_limits if voltage else self.i_limits
        low = low if abs(low - zero) > band else low - 1
        high = high if abs(high - zero) > band else high + 1
        return (low, high, zero - band, FAR) if sign == 1 else (low, high, -FAR, zero + band)

    def oriented_limits(self, *, voltage: bool) -> tuple[int, int]:
        """Return the converter's limits of one channel as oriented codes, low and high (see `raw_bounds`)."""
        low, high, _, _ = self.raw_bounds(voltage=voltage)
        sign, zero = (self.v_sign, self.v_zero) if voltage else (self.i_sign, self.i_zero)
        return (low - zero, high - zero) if sign == 1 else (zero - high, zero - low)


def raw_limits(sign: str, bits: int) -> tuple[int, int]:
    """Return the lowest and highest code of a converter: signed ('s', two's complement) or unsigned ('u')."""
    return (-(1 << bits - 1), (1 << bits - 1) - 1) if sign == "s" else (0, (1 << bits) - 1)


Extremes = tuple[int, int, int, int]


@swift_by_name
class SampleBlock:
    """Consecutive pairs, oriented, with what the MCU did and saw at the first pair's tick."""

    index: int  # of the first pair, unwrapped
    tick: int  # of the first pair, unwrapped
    v: tuple[int, ...]  # oriented monitor codes above zero
    i: tuple[int, ...]
    v_word: int  # words applied at the first pair's tick
    i_word: int
    state: int  # McuState
    latched: bool
    inputs: int  # Inputs
    missed: int  # conversions missed since boot
    event: int  # number of the last MCU event
    arc: int  # number of the last arc of this arm
    arrival_s: float  # host monotonic
    gap: int  # pairs missing before this block
    flags: Flags
    raw: Block
    sample_ticks: int
    _extremes: Extremes | None = field(default=None, init=False, compare=False, repr=False)
    _sums: tuple[int, int] | None = field(default=None, init=False, compare=False, repr=False)

    @property
    def sums(self) -> tuple[int, int]:
        """The sum of the voltage codes and of the current codes; added up once and then known."""
        known = self._sums
        if known is None:
            known = (sum(self.v), sum(self.i))
            object.__setattr__(self, "_sums", known)
        return known

    @property
    def extremes(self) -> Extremes:
        """Least and greatest voltage code, least and greatest current code; looked for once and then known."""
        known = self._extremes
        if known is None:
            known = (min(self.v), max(self.v), min(self.i), max(self.i))
            object.__setattr__(self, "_extremes", known)
        return known

    @property
    def pairs(self) -> int:
        """How many pairs the block holds."""
        return len(self.v)

    @property
    def last_index(self) -> int:
        """Index of the last pair."""
        return self.index + len(self.v) - 1

    @property
    def last_tick(self) -> int:
        """Tick of the last pair."""
        return self.tick + (len(self.v) - 1) * self.sample_ticks
