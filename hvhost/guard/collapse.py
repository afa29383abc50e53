"""The collapse: a fall of the readback that neither the set-point nor the load's own current explains.

Over a window of w samples the readback fell from ``base`` to ``v``.  Three things explain part of a fall:

* the words: max - min of the voltage words applied over the window and the programming delay before it.  Words are
  known at each block's first sample only and a segment may have run anywhere between two of them, so the last one
  known before the window counts as in it; after the last known one they may have fallen by the slew ceiling;
* the load's own current: with the supply giving nothing (a mains dip, the change from voltage to current control) the
  load discharges output and cable, dv/dt = -i/C, with the current that flowed before the fall.  It never explains
  more than half of the voltage;
* one sample alone: the base must have been held by n samples, and n samples must have fallen.

All in integer codes, sample by sample in order, so that a replay repeats it to the bit.
"""

from typing import NamedTuple

from hvhost.guard.limits import GuardLimits
from hvhost.guard.view import Collapse, View


class Fallen(NamedTuple):
    """What is carried from block to block: from when history counts, and the fall that is on, if one is."""

    since: int  # first sample index that may serve as history
    run: int = 0  # consecutive fallen samples
    confirmed: bool = False
    odd: int = 0  # falls of fewer than n samples, counted as interfering
    base: int = 0
    window_from: int = 0  # index at which the window of the fall began
    current: int = 0  # load current before the fall, code
    word_low: int = 0  # extremes of the words since the window began
    word_high: int = 0
    started: int = 0
    lowest: int = 0
    energy: int = 0  # fed into the fall that is on
    total: int = 0  # energy of all confirmed falls that ended


NO_FALL = Fallen(since=0, base=-(1 << 40))  # a base below every code: nothing falls from it


def history_needed(limits: GuardLimits) -> int:
    """Return how many samples before a block the rule may look back on."""
    return limits.drop_samples + limits.delay_samples + limits.persist + 1


def follow_fall(view: View, limits: GuardLimits, fallen: Fallen) -> tuple[Fallen, Collapse | None]:
    """Judge one block; return what to carry on and the collapse that is on, if it is confirmed."""
    if not fallen.run:
        drop = limits.drop
        top = view.v_high
        for earlier in view.before:
            if earlier.v_high > top:
                top = earlier.v_high
        if top - view.v_low <= drop or not _falls(view, drop):
            return fallen, None
    return _walk(view, limits, fallen)


def _falls(view: View, drop: int) -> bool:
    """True when some sample lies more than ``drop`` below an earlier one, whatever explains it."""
    top = max([earlier.v_high for earlier in view.before], default=view.v[0])
    for code in view.v:
        if code > top:
            top = code
        elif top - code > drop:
            return True
    return False


class Samples(NamedTuple):
    """The samples that a block is judged with: those before it that may serve as history, then its own."""

    begin: int  # position of the block's first sample
    v: list[int]
    i: list[int]
    indices: list[int]
    held: list[int]
    points: list[tuple[int, int]]  # (sample index, voltage word) where the words are known


def _samples(view: View, limits: GuardLimits, since: int) -> Samples:
    past = [earlier for earlier in view.before if earlier.index >= since]
    views = [*past, view]
    v = [code for each in views for code in each.v]
    return Samples(
        begin=len(v) - len(view.v), v=v, i=[code for each in views for code in each.i],
        indices=[index for each in views for index in range(each.index, each.index + len(each.v))],
        held=_held(v, limits.persist), points=[(each.index, each.v_word) for each in views])


def _walk(view: View, limits: GuardLimits, fallen: Fallen) -> tuple[Fallen, Collapse | None]:
    """Follow every sample of the block."""
    samples = _samples(view, limits, fallen.since)
    if fallen.run:
        fallen = fallen._replace(word_low=min(fallen.word_low, view.v_word),
                                 word_high=max(fallen.word_high, view.v_word))
    latest: Collapse | None = None
    first: Collapse | None = None  # the first that was confirmed in this block
    for k in range(samples.begin, len(samples.v)):
        code, index = samples.v[k], samples.indices[k]
        trial = fallen if fallen.run else _trial(k, samples, limits, fallen)
        fall = trial.base - code
        unexplained = fall - _explained(trial, view, index, limits) if fall > limits.drop else 0
        if unexplained > limits.drop:
            fallen = _deeper(trial, code, samples.i[k])
            if fallen.run >= limits.persist and not fallen.confirmed:
                fallen = fallen._replace(confirmed=True)
                first = first or _collapse(fallen, index, k - samples.begin, unexplained, limits)
        elif fallen.run:
            latest = _collapse(fallen, index, -1, 0, limits) if fallen.confirmed else latest
            fallen = ended(fallen, limits)
    if fallen.confirmed:
        latest = _collapse(fallen, samples.indices[-1], -1, 0, limits)
    if latest is not None and first is not None:
        latest = latest._replace(confirmed_at=first.confirmed_at, unexplained=first.unexplained, base=first.base)
    return fallen, latest


def _trial(k: int, samples: Samples, limits: GuardLimits, fallen: Fallen) -> Fallen:
    """Return the fall that would begin with sample k: its base, its window, and what may explain it."""
    start = max(0, k - limits.drop_samples)
    base = max(samples.held[start:k], default=samples.v[k])
    if base - samples.v[k] <= limits.drop:
        return NO_FALL
    window_from, index = samples.indices[start], samples.indices[k]
    low, high = _word_extremes(samples.points, window_from - limits.delay_samples)
    return fallen._replace(base=base, window_from=window_from, current=_current_before(samples.i, start, limits),
                           word_low=low, word_high=high, started=index, lowest=samples.v[k], energy=0)


def _held(v: list[int], n: int) -> list[int]:
    """Return for each sample the least of the n samples that end with it: a level that n samples held."""
    return v if n == 1 else [min(v[max(0, k - n + 1):k + 1]) for k in range(len(v))]


def _current_before(i: list[int], start: int, limits: GuardLimits) -> int:
    """Return the greatest load current that two samples in a row held in the programming delay before the window.

    A shunt inside the supply shows nothing any more once a dip of the mains is on, hence the look further back.
    """
    first = max(1, start - limits.delay_samples)
    return max(0, max([min(i[j - 1], i[j]) for j in range(first, start + 1)], default=i[start]))


def _word_extremes(points: list[tuple[int, int]], start: int) -> tuple[int, int]:
    """Return the least and greatest voltage word known from the last one at or before sample ``start`` on."""
    first = max((at for at, (index, _) in enumerate(points) if index <= start), default=0)
    words = [word for _, word in points[first:]]
    return min(words), max(words)


def _explained(trial: Fallen, view: View, index: int, limits: GuardLimits) -> int:
    """Return the codes of the fall from ``trial.base`` that words and load current explain at this sample."""
    # the words may have fallen since this block's first sample: slew ceiling x samples, never below zero
    least = max(0, (view.v_word * limits.v_map_q16 >> 16) - ((index - view.index) * limits.fall_q16 >> 16))
    low = min(trial.word_low * limits.v_map_q16 >> 16, least)
    words = (trial.word_high * limits.v_map_q16 >> 16) - low
    # dv = i x samples / C, in codes
    drained = trial.current * limits.drain_q16 * (index - trial.window_from) >> 16
    return words + min(drained, max(0, trial.base) >> 1)


def _deeper(trial: Fallen, v: int, i: int) -> Fallen:
    """Count one fallen sample and what was fed into it."""
    return trial._replace(run=trial.run + 1, lowest=min(trial.lowest, v), energy=trial.energy + max(0, v) * max(0, i))


def ended(fallen: Fallen, limits: GuardLimits, since: int | None = None) -> Fallen:
    """Return what is carried on after the fall that was on, if one was; history begins anew at ``since``."""
    short = 0 < fallen.run < limits.persist
    total = fallen.total + (_energy(fallen, limits) if fallen.confirmed else 0)
    return Fallen(since=fallen.since if since is None else since, odd=fallen.odd + short, total=total)


def _energy(fallen: Fallen, limits: GuardLimits) -> int:
    """Energy that went into this fall, in v_code x i_code x samples."""
    # E = sum(v i) Ts + C (base^2 - lowest^2) / 2
    return fallen.energy + (limits.stored_q16 * max(0, fallen.base**2 - max(0, fallen.lowest) ** 2) >> 16)


def _collapse(fallen: Fallen, last: int, at: int, unexplained: int, limits: GuardLimits) -> Collapse:
    return Collapse(started=fallen.started, last=last, confirmed_at=at, unexplained=unexplained, base=fallen.base,
                    total=fallen.total + _energy(fallen, limits))
