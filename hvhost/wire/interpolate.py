"""Set-point words between two targets, in integers, defined to the bit (PROTOCOL.md section 6).

A segment of ``ticks`` ticks leads from word ``start`` to word ``target``.  ``k`` ticks after its first tick the word is

    start + sign * floor(|target - start| * k / ticks),   sign = sign of target - start

so that every word lies within one code of the exact line, never beyond the target, and the word at ``k = ticks`` is
the target.  An implementation may add whole codes and carry the remainder from tick to tick; the result is the same.
"""

from dataclasses import dataclass

WORD_MAX = 0xFFFF
TICKS_MAX = 0xFFFFFFFF


def word_at(start: int, target: int, ticks: int, k: int) -> int:
    """Return the word ``k`` ticks (0 to ``ticks``) into a segment of at least one tick."""
    if target >= start:
        return start + (target - start) * k // ticks
    return start - (start - target) * k // ticks


def lowered_word(start: int, slew: int, tick_hz: int, k: int) -> int:
    """Return the word ``k`` ticks into a lower from ``start`` at ``slew`` codes per second; zero at the end."""
    return max(0, start - slew * k // tick_hz)


def lower_ticks(start: int, slew: int, tick_hz: int) -> int:
    """Return after how many ticks a lower from ``start`` has reached zero (the exact line, rounded up)."""
    return -(-start * tick_hz // slew)


def within_slew(start: int, target: int, ticks: int, tick_hz: int, slew: int) -> bool:
    """Whether a segment's mean slope is at most ``slew`` codes per second (|target - start| * tick_hz <= slew * D)."""
    return abs(target - start) * tick_hz <= slew * ticks


def shortest(start: int, target: int, tick_hz: int, slew: int) -> int:
    """Return the fewest ticks, at least one, that `within_slew` allows."""
    return max(1, -(-abs(target - start) * tick_hz // slew))


def current_first(v_before: int, v_after: int) -> bool:
    """Whether the current word is loaded before the voltage word: going up the current limit leads."""
    return v_after > v_before


@dataclass(frozen=True, slots=True)
class Ramp:
    """One segment being executed: both channels share its duration."""

    v0: int
    i0: int
    v1: int
    i1: int
    ticks: int

    def at(self, k: int) -> tuple[int, int]:
        """Return both words ``k`` ticks in; from ``ticks`` on they are the targets."""
        if k >= self.ticks:
            return self.v1, self.i1
        return word_at(self.v0, self.v1, self.ticks, k), word_at(self.i0, self.i1, self.ticks, k)
