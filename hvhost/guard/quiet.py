"""One look that spares most rules: a block inside every limit, on time, whole, with every contact closed.

Nearly every rule begins with a comparison of the block's extremes, contacts or place in the stream, and where that
holds and nothing is going on it returns what it remembers.  For a block on which all of these hold at once the rules
are not asked at all: their memories stay as they are, which is what they would have answered.  `AT_REST` says for each
such rule when it remembers nothing that is going on.  A test judges random blocks with and without this look.
"""

from collections.abc import Callable, Sequence
from typing import Any, NamedTuple

from hvhost.guard.limits import GuardLimits
from hvhost.guard.rules import EVERY, LIVE, SLOT, Judge
from hvhost.guard.view import View
from hvhost.samples.blocks import FAR, Flags
from hvhost.wire.vocabulary import HostRule

STALE = int(Flags.STALE)


def _always(memory: Any) -> bool:
    return True


def _no_excursion(memory: Any) -> bool:
    return not memory.length


def _not_waiting(memory: Any) -> bool:
    return not memory.length and memory.waiting < 0


def _not_pinned(memory: Any) -> bool:
    return not (memory.v or memory.i)


def _not_told(memory: Any) -> bool:
    return not memory.told


# rule -> when its memory says that nothing is going on
AT_REST: dict[HostRule, Callable[[Any], bool]] = {
    HostRule.BREAKDOWN: _always, HostRule.ARC_ENERGY: _always, HostRule.GAP: _always,
    HostRule.OVERCURRENT: _not_waiting, HostRule.OVERCURRENT_LEVEL: _no_excursion, HostRule.OVERVOLTAGE: _no_excursion,
    HostRule.MISSING: _no_excursion, HostRule.SATURATED: _not_pinned, HostRule.REVERSED: _not_pinned,
    HostRule.INTERLOCK: _not_told, HostRule.GROUNDING: _not_told, HostRule.AUXILIARY: _not_told,
    HostRule.STALE: _not_told,
}
_RESTS = tuple((SLOT[rule], rests) for rule, rests in AT_REST.items())
_SPARED = frozenset(SLOT[rule] for rule in AT_REST)


def _asked(rules: tuple[tuple[int, Judge], ...]) -> tuple[tuple[int, Judge], ...]:
    return tuple((at, judge) for at, judge in rules if at not in _SPARED)


# the rules that are asked about a quiet block, by state
ASKED: dict[int, tuple[tuple[int, Judge], ...]] = {state: _asked(rules) for state, rules in LIVE.items()}
ASKED_ALWAYS = _asked(EVERY)


class Band(NamedTuple):
    """What the extremes of a quiet block lie within, both ends allowed, and the contacts that are closed."""

    v_least: int
    v_most: int
    i_least: int
    i_most: int
    contacts: int


def band_of(limits: GuardLimits) -> Band:
    """Return the band inside which none of the spared rules has anything to say."""
    v_end, i_end = limits.v_limits, limits.i_limits
    return Band(
        v_least=max(v_end[0] + 1, limits.zero_band + 1, -limits.zero_band),
        v_most=min(v_end[1] - 1, limits.overvoltage), i_least=max(i_end[0] + 1, -limits.i_band),
        i_most=min(i_end[1] - 1, limits.overcurrent, limits.level or FAR), contacts=limits.contacts)


def quiet(view: View, band: Band) -> bool:
    """Whether the block lies inside the band, on time and whole, with nothing falling."""
    v_least, v_most, i_least, i_most, contacts = band
    block = view.block
    return (view.v_low >= v_least and view.v_high <= v_most and view.i_low >= i_least and view.i_high <= i_most
            and not view.gap and view.collapse is None and block.inputs & contacts == contacts
            and not int(block.flags) & STALE)


def at_rest(memories: Sequence[Any]) -> bool:
    """Whether no spared rule remembers anything that is going on."""
    return all(rests(memories[at]) for at, rests in _RESTS)
