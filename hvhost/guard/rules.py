"""The one table of rules: each with its number, its pure function, its first memory and the states it is live in.

A rule is ``rule(view, limits, memory) -> (memory, verdict or None)``.  In a state in which it is not live its memory
starts afresh; only what it counted as interfering, and the energy of the step, outlive that.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

from hvhost.guard.amplitude import (
    Level,
    Pinned,
    Run,
    overcurrent,
    overcurrent_level,
    overvoltage,
    reversed_readback,
    saturated,
)
from hvhost.guard.breakdown import Spent, arc_energy, breakdown
from hvhost.guard.limits import GuardLimits
from hvhost.guard.plausibility import Apart, Climb, Missing, Still, deviation, missing, not_following, stuck
from hvhost.guard.stream import POWERED, Told, auxiliary, gap, grounding, interlock, stale_block
from hvhost.guard.verdicts import Verdict
from hvhost.guard.view import View
from hvhost.wire.vocabulary import HostRule, McuState

Judge = Callable[[View, GuardLimits, Any], tuple[Any, Verdict | None]]

ALWAYS = frozenset(McuState)
ENERGISED = frozenset({McuState.ENERGISED})
WORDS_OUT = frozenset({McuState.ENERGISED, McuState.LOWERING})
PREPARED = POWERED | {McuState.PROVING}


@dataclass(frozen=True, slots=True)
class Rule:
    """One line of the table."""

    number: HostRule
    judge: Judge
    fresh: Any  # the memory that it starts with
    live: frozenset[McuState]
    lasting: bool = False  # the memory outlives states in which the rule is not live


RULES: tuple[Rule, ...] = (
    Rule(HostRule.BREAKDOWN, breakdown, Told(), WORDS_OUT),  # after a stop the bench's own discharge is a fall, too
    Rule(HostRule.OVERCURRENT, overcurrent, Run(), POWERED),
    Rule(HostRule.OVERCURRENT_LEVEL, overcurrent_level, Level(), WORDS_OUT),
    Rule(HostRule.OVERVOLTAGE, overvoltage, Run(), POWERED),
    Rule(HostRule.ARC_ENERGY, arc_energy, Spent(), WORDS_OUT, lasting=True),
    Rule(HostRule.INTERLOCK, interlock, Told(), PREPARED),  # with the output off an open contact only bars arming
    Rule(HostRule.GROUNDING, grounding, Told(), PREPARED),
    Rule(HostRule.AUXILIARY, auxiliary, Told(), PREPARED),
    Rule(HostRule.SATURATED, saturated, Pinned(), POWERED),
    Rule(HostRule.REVERSED, reversed_readback, Pinned(), POWERED),
    Rule(HostRule.STUCK, stuck, Still(), ENERGISED),
    Rule(HostRule.MISSING, missing, Missing(), ENERGISED),
    Rule(HostRule.DEVIATION, deviation, Apart(), ENERGISED),
    Rule(HostRule.NOT_FOLLOWING, not_following, Climb(), ENERGISED),
    Rule(HostRule.GAP, gap, Told(), ALWAYS),
    Rule(HostRule.STALE, stale_block, Told(), ALWAYS),
)

SLOT: dict[HostRule, int] = {rule.number: at for at, rule in enumerate(RULES)}
LIVE: dict[int, tuple[tuple[int, Judge], ...]] = {
    int(state): tuple((at, rule.judge) for at, rule in enumerate(RULES) if state in rule.live) for state in McuState}
EVERY: tuple[tuple[int, Judge], ...] = tuple((at, rule.judge) for at, rule in enumerate(RULES))
