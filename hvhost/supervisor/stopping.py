"""Deciding to cut or to lower, and what became of the last cut (S7)."""

from typing import TYPE_CHECKING

from hvhost.supervisor.runs import Outcome, rule_word
from hvhost.supervisor.states import LIVE
from hvhost.wire.vocabulary import HostRule

if TYPE_CHECKING:
    from hvhost.supervisor.core import Core

CONFIRM_S = 1.0  # a cut not confirmed after this is told as such
CONFIRMED, SENT = "cut confirmed", "cut sent"
NOT_CONFIRMED = "cut not confirmed: use the emergency switching off"


def cut_for(core: "Core", rule: HostRule, now_s: float, why: str = "", outcome: Outcome = Outcome.TRIPPED) -> int:
    """Decide to cut by a rule of the host; the caller's output carries it; returns the stop's number (0: no link)."""
    if core.link is None:
        return 0
    number = core.link.cut(rule, now_s)
    decided(core, now_s)
    word = why or rule_word(rule)
    core.say(now_s, "trip", f"cut: {word}")
    core.note(now_s, "stop", how="cut", why=word, number=number)
    if rule is not HostRule.OPERATOR:
        core.host_rule = int(rule)
    run = core.run
    if run is not None and run.open:
        run.host_rule = int(rule)
        run.end(outcome, word if rule is HostRule.OPERATOR else f"host: {word}")
    return number


def lower_for(core: "Core", outcome: Outcome, why: str, now_s: float) -> None:
    """Decide to lower; an armed or live run ends with this outcome."""
    if core.link is None:
        return
    number = core.link.lower(now_s)
    core.say(now_s, "attention", f"lower: {why}")
    core.note(now_s, "stop", how="lower", why=why, number=number)
    if core.run is not None and core.run.open:
        core.run.end(outcome, why)


def decided(core: "Core", now_s: float) -> None:
    """Remember since when a cut waits for its confirmation."""
    if core.stop_decided_s is None:
        core.stop_decided_s = now_s


def overdue(core: "Core", now_s: float) -> bool:
    """Whether a cut should have been confirmed by now."""
    return core.stop_decided_s is not None and now_s - core.stop_decided_s > CONFIRM_S


def cut_words(core: "Core", now_s: float) -> str:
    """What became of the last cut, in the words of S7; nothing while a later arm is live."""
    if core.stop_decided_s is not None:
        return NOT_CONFIRMED if core.link is None or overdue(core, now_s) else SENT
    if core.link is None or not core.link.stop_confirmed or core.state.permission in LIVE:
        return ""
    return CONFIRMED
