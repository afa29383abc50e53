"""Deciding to stop, and what became of it in words (S7)."""

from hvhost.supervisor.runs import Outcome
from hvhost.supervisor.stopping import CONFIRM_S, CONFIRMED, NOT_CONFIRMED, SENT, cut_for, cut_words, lower_for
from hvhost.wire.vocabulary import HostRule
from tests.supervisor.lab import Lab


def test_the_words_go_from_sent_to_confirmed(lab: Lab) -> None:
    """Nothing before a cut; sent; confirmed by answer and block."""
    lab.ready()
    assert cut_words(lab.core, lab.now_s) == ""
    cut_for(lab.core, HostRule.OPERATOR, lab.now_s, "test")
    assert cut_words(lab.core, lab.now_s) == SENT
    lab.station.flush()
    lab.pass_s(0.2)
    assert cut_words(lab.core, lab.now_s) == CONFIRMED


def test_a_second_cut_is_timed_from_its_own_decision(lab: Lab) -> None:
    """A cut confirmed long ago lends its time to no later one, whether or not anyone looked."""
    lab.ready()
    lab.ask("cut")
    lab.pass_s(3.0)
    lab.ask("cut")
    assert cut_words(lab.core, lab.now_s) == SENT


def test_without_a_link_a_cut_is_not_confirmed(lab: Lab) -> None:
    """The port went after it was sent."""
    lab.ready()
    lab.ask("cut")
    lab.unplug()
    assert cut_words(lab.core, lab.now_s) == NOT_CONFIRMED


def test_an_unanswered_cut_is_told_in_time(lab: Lab) -> None:
    """After a second the screens send people to the emergency switching off; the cut goes on being repeated."""
    lab.ready()
    lab.tap = lambda line: line if line.startswith(b"b ") else b""
    lab.ask("cut")
    lab.pass_s(CONFIRM_S + 0.1)
    assert cut_words(lab.core, lab.now_s) == NOT_CONFIRMED
    assert sum(data.count(b"\ncut ") for _, data in lab.sent) > 40


def test_stops_without_a_port_change_nothing(lab: Lab) -> None:
    """Nothing to write to; the caller says so to people."""
    assert cut_for(lab.core, HostRule.STALE, 0.0) == 0
    lower_for(lab.core, Outcome.LOWERED, "test", 0.0)
    assert lab.core.stop_decided_s is None


def test_a_pending_cut_goes_on_in_the_next_session(lab: Lab) -> None:
    """The port went before the answer: the new session begins with the cut, and confirms it."""
    lab.ready()
    lab.ask("cut")
    lab.unplug()
    lab.sent.clear()
    lab.plug()
    assert any(b"\ncut " in data for _, data in lab.sent)
    lab.pass_s(1.0)
    assert cut_words(lab.core, lab.now_s) == CONFIRMED
    assert lab.core.host_rule == 0
