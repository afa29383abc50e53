"""From a step and the words that stand now to integer segments as the wire carries them.

Pure.  One segment moves one channel, so that going up the current limit leads and going down the voltage does.  The
MCU refuses a segment whose target lies above a ceiling or whose slew does: ``|code change| * tick_hz <= slew * ticks``
with the slew in codes per second.  The same test, in the same integers, decides here how many ticks a segment needs.
"""

from dataclasses import dataclass
from math import isfinite

from hvhost.bench.model import Bench, Scale
from hvhost.plan.program import RampStep, RestStep, SegmentTarget, Step
from hvhost.words.errors import CommandRefused

# Longest single segment.  The wire carries 32 bits; half of that keeps differences of wrapping 32-bit ticks signed.
TICKS_MAX = 0x7FFF_FFFF


@dataclass(frozen=True, slots=True, kw_only=True)
class Ceilings:
    """The MCU's ceilings in codes and codes per second."""

    v: int
    i: int
    v_slew: int
    i_slew: int

    @classmethod
    def of(cls, bench: Bench) -> "Ceilings":
        """Take them from the settings that belong to the bench."""
        settings = bench.settings()
        return cls(v=settings["vmax"], i=settings["imax"], v_slew=settings["vslew"], i_slew=settings["islew"])


def fewest_ticks(change: int, slew: int, tick_hz: int) -> int:
    """Return the least ticks (at least 1) in which a word may change by ``change`` codes at ``slew`` codes/s."""
    # |change| * tick_hz <= slew * ticks  <=>  ticks >= ceil(|change| * tick_hz / slew)
    return max(1, -(-abs(change) * tick_hz // slew))


def split_move(start: int, end: int, ticks: int) -> tuple[tuple[int, int], ...]:
    """Cut one move into (target, ticks) of at most ``TICKS_MAX`` ticks, every word within one code of the line.

    A move that must be cut is first stretched to a whole number of ticks per code (by less than one tick per code,
    at most 0.004 % of its length), so that each cut falls where the line meets a code and no part is steeper than the
    whole.  A code that takes longer than one segment is waited for in segments that change nothing.
    """
    if ticks <= TICKS_MAX:
        return ((end, ticks),)
    change = abs(end - start)
    sign = 1 if end > start else -1
    if change == 0:
        return tuple((end, part) for part in _parts(ticks))
    per_code = -(-ticks // change)
    if per_code > TICKS_MAX:
        return tuple((start + sign * (code + (at == last)), part)
                     for code in range(change)
                     for parts in (_parts(per_code),) for last in (len(parts) - 1,)
                     for at, part in enumerate(parts))
    codes = TICKS_MAX // per_code
    reached = [*range(codes, change, codes), change]
    return tuple((start + sign * code, per_code * (code - before))
                 for before, code in zip([0, *reached], reached, strict=False))


def _parts(ticks: int) -> tuple[int, ...]:
    whole, rest = divmod(ticks, TICKS_MAX)
    return (TICKS_MAX,) * whole + ((rest,) if rest else ())


def word_of(scale: Scale, value: float, ceiling_value: float, ceiling_word: int, what: str) -> int:
    """Return the word for a set-point; zero is always word 0; above the ceiling it raises `CommandRefused`."""
    if not isfinite(value) or value < 0.0 or value > ceiling_value * (1 + 1e-9):
        raise CommandRefused(f"a {what} of 0 to {ceiling_value:g}", f"{value:g}", what)
    if value == 0.0:
        return 0
    # Half a code of rounding must not lift the word over the ceiling that the MCU checks.
    return min(scale.code(min(value, ceiling_value)), ceiling_word)


def words_of(step: Step, i_word: int, bench: Bench) -> tuple[int, int]:
    """Return the (voltage, current) words at which a step ends; a rest is at zero volts and keeps the current word."""
    if isinstance(step, RestStep):
        return 0, i_word
    volts = step.to_v if isinstance(step, RampStep) else step.v
    ceilings = Ceilings.of(bench)
    return (word_of(bench.voltage.program, volts, bench.v_max, ceilings.v, "voltage set-point, V"),
            word_of(bench.current.program, step.limit_a, bench.i_max, ceilings.i, "current limit, A"))


def slew_of(step: Step, bench: Bench) -> float:
    """Return the slew in V/s at which a step moves the voltage: a ramp's own, a rest's down-slew, else the bench's."""
    if isinstance(step, RampStep):
        return step.slew_v_per_s
    return bench.down_slew_v_per_s if isinstance(step, RestStep) else bench.slew_v_per_s


def segments_for(step: Step, v_word: int, i_word: int, bench: Bench, tick_hz: int) -> tuple[SegmentTarget, ...]:
    """Return the segments that take the words from where they stand to where the step wants them.

    The voltage takes ``|code change| * volts per code / slew``, never less than the slew ceiling allows; the current
    limit moves as fast as its ceiling.  Nothing to change gives no segment (the words stand by themselves).
    """
    v_end, i_end = words_of(step, i_word, bench)
    ceilings = Ceilings.of(bench)
    volts = abs(v_end - v_word) * bench.voltage.program.quantum
    v_ticks = max(fewest_ticks(v_end - v_word, ceilings.v_slew, tick_hz), round(volts / slew_of(step, bench) * tick_hz))
    i_ticks = fewest_ticks(i_end - i_word, ceilings.i_slew, tick_hz)
    return moves(v_word, i_word, v_end, i_end, v_ticks, i_ticks)


def moves(v_word: int, i_word: int, v_end: int, i_end: int, v_ticks: int, i_ticks: int) -> tuple[SegmentTarget, ...]:
    """Return the segments of both moves in their order: current first, but voltage first where it goes down."""
    voltage_leads = v_end < v_word
    v_parts = split_move(v_word, v_end, v_ticks) if v_end != v_word else ()
    i_parts = split_move(i_word, i_end, i_ticks) if i_end != i_word else ()
    i_meanwhile = i_word if voltage_leads else i_end
    v_meanwhile = v_end if voltage_leads else v_word
    v_moves = tuple(SegmentTarget(v=v, i=i_meanwhile, ticks=ticks) for v, ticks in v_parts)
    i_moves = tuple(SegmentTarget(v=v_meanwhile, i=i, ticks=ticks) for i, ticks in i_parts)
    return v_moves + i_moves if voltage_leads else i_moves + v_moves
