"""Rules about the stream and the contacts: gap, stale block, interlock, grounding device, auxiliary supplies."""

from typing import NamedTuple

from hvhost.guard.amplitude import verdict
from hvhost.guard.limits import GuardLimits
from hvhost.guard.verdicts import Severity, Verdict
from hvhost.guard.view import View
from hvhost.samples.blocks import Flags
from hvhost.wire.vocabulary import HostRule, Inputs, McuState

POWERED = frozenset({McuState.WARNING, McuState.ENERGISED, McuState.PAUSING, McuState.LOWERING})
_STALE = int(Flags.STALE)
_LOOP = int(Inputs.INTERLOCK | Inputs.EMERGENCY)
_GROUND, _AUXILIARY = int(Inputs.GROUND_OPEN), int(Inputs.AUXILIARY)


class Told(NamedTuple):
    """Whether a condition that lasts was told already."""

    told: bool = False


def gap(view: View, limits: GuardLimits, told: Told) -> tuple[Told, Verdict | None]:
    """Pairs are missing before this block: a trip from ``gap_samples`` on where power is on, else an event."""
    if not view.gap:
        return told, None
    severity = Severity.TRIP if view.gap >= limits.gap_samples and view.state in POWERED else Severity.EVENT
    return told, verdict(HostRule.GAP, severity, view, 0, limits.gap_samples, view.gap,
                         f"{view.gap} samples missing ({limits.seconds(view.gap)})")


def stale_block(view: View, limits: GuardLimits, told: Told) -> tuple[Told, Verdict | None]:
    """A block arrived late: an event, once a backlog (the lease is not renewed by it, and silence has its own rule)."""
    if not int(view.block.flags) & _STALE:  # plain: IntFlag arithmetic costs a microsecond
        return (NOT_TOLD, None) if told.told else (told, None)
    if told.told:
        return told, None
    return TOLD, verdict(HostRule.STALE, Severity.EVENT, view, 0, limits.stale_ms, 0, "samples arrive late")


TOLD, NOT_TOLD = Told(True), Told(False)


def interlock(view: View, limits: GuardLimits, told: Told) -> tuple[Told, Verdict | None]:
    """The interlock loop or the emergency contact is open."""
    wanted = limits.contacts & _LOOP
    if view.block.inputs & wanted == wanted:
        return NOT_TOLD, None
    return _open(view, wanted, told, _LOOP, HostRule.INTERLOCK, "interlock or emergency contact open")


def grounding(view: View, limits: GuardLimits, told: Told) -> tuple[Told, Verdict | None]:
    """The grounding device is not in its open position."""
    wanted = limits.contacts & _GROUND
    if view.block.inputs & wanted == wanted:
        return NOT_TOLD, None
    return _open(view, wanted, told, _GROUND, HostRule.GROUNDING, "grounding device not in its open position")


def auxiliary(view: View, limits: GuardLimits, told: Told) -> tuple[Told, Verdict | None]:
    """The auxiliary supplies are not good."""
    wanted = limits.contacts & _AUXILIARY
    if view.block.inputs & wanted == wanted:
        return NOT_TOLD, None
    return _open(view, wanted, told, _AUXILIARY, HostRule.AUXILIARY, "auxiliary supplies failed")


def _open(view: View, wanted: int, told: Told, mask: int, rule: HostRule,
          text: str) -> tuple[Told, Verdict | None]:
    if told.told:
        return told, None
    return TOLD, verdict(rule, Severity.TRIP, view, 0, wanted, view.block.inputs & mask, text)
