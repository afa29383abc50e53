"""Rules on a collapse that was found: the breakdown itself, and the energy that a step's arcs have taken."""

from typing import NamedTuple

from hvhost.guard.amplitude import verdict
from hvhost.guard.limits import GuardLimits
from hvhost.guard.stream import Told
from hvhost.guard.verdicts import Severity, Verdict
from hvhost.guard.view import View
from hvhost.wire.vocabulary import HostRule


class Spent(NamedTuple):
    """Energy of all arcs seen, in v_code x i_code x samples, and what of it came before this step."""

    step: int = 0
    total: int = 0
    earlier: int = 0
    reported: bool = False


def breakdown(view: View, limits: GuardLimits, told: Told) -> tuple[Told, Verdict | None]:
    """A collapse was confirmed in this block."""
    fall = view.collapse
    if fall is None or fall.confirmed_at < 0:
        return told, None
    return told, verdict(
        HostRule.BREAKDOWN, Severity.ARC, view, fall.confirmed_at, limits.drop, fall.unexplained,
        f"voltage collapsed from {limits.volts(fall.base)}: {limits.volts(fall.unexplained)} unexplained")


def arc_energy(view: View, limits: GuardLimits, spent: Spent) -> tuple[Spent, Verdict | None]:
    """The arcs of this step have together taken more than the step allows."""
    if spent.step != limits.step:
        spent = Spent(step=limits.step, total=spent.total, earlier=spent.total)
    fall = view.collapse
    if fall is None or fall.total == spent.total:
        return spent, None
    spent = spent._replace(total=fall.total)
    taken = spent.total - spent.earlier
    if not limits.arc_energy or taken <= limits.arc_energy or spent.reported:
        return spent, None
    return spent._replace(reported=True), verdict(
        HostRule.ARC_ENERGY, Severity.TRIP, view, len(view.v) - 1, limits.arc_energy, taken,
        f"arcs of this step took {limits.joules(taken):.3g} J, {limits.joules(limits.arc_energy):.3g} J allowed")
