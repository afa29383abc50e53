"""The way to a set-point that is set by hand: queued in short pieces, so that a new one soon acts."""

from dataclasses import dataclass, replace

from hvhost.bench.model import Bench
from hvhost.plan.program import RampStep, SegmentTarget
from hvhost.plan.segments import segments_for

PIECE_S = 0.25  # length of a piece; one code may take longer
AHEAD = 2  # pieces queued ahead


@dataclass(frozen=True, slots=True, kw_only=True)
class SetPoint:
    """Where a direct run is heading: volts, current limit, and the slew on the way."""

    volts: float
    amps: float
    slew_v_per_s: float


def next_piece(goal: SetPoint, words: tuple[int, int], bench: Bench, tick_hz: int) -> SegmentTarget | None:
    """The next piece of the way from these words, None where they stand at the goal."""
    step = RampStep(number=0, name="direct", place="set", to_v=goal.volts, slew_v_per_s=goal.slew_v_per_s,
                    limit_a=goal.amps)
    segments = segments_for(step, *words, bench, tick_hz)
    if not segments:
        return None
    first = segments[0]
    codes = abs(first.v - words[0]) + abs(first.i - words[1])  # one of the two stands still
    if not codes:
        return first
    ticks = max(round(PIECE_S * tick_hz), -(-first.ticks // codes))  # at least one code, or it would never move
    if first.ticks <= ticks:
        return first
    v, i = (start + _part(end - start, ticks, first.ticks) for start, end in
            ((words[0], first.v), (words[1], first.i)))
    return replace(first, v=v, i=i, ticks=ticks)


def _part(delta: int, ticks: int, whole: int) -> int:
    """The share of ``delta`` after ``ticks`` of ``whole``, rounded towards zero like the wire's interpolation."""
    share = abs(delta) * ticks // whole
    return share if delta >= 0 else -share
