"""What people may ask: who may, what is refused whole, what is said."""

import pytest

from hvhost.supervisor.commands import COMMANDS, NEED_SEAT
from hvhost.supervisor.states import Permission
from hvhost.wire.vocabulary import Cause
from hvhost.words.errors import CommandRefused
from tests.supervisor.lab import OTHER, Lab


def test_what_energises_or_loosens_needs_control_and_what_stops_does_not() -> None:
    """Stops, cancels and looks are open to everyone."""
    assert set(COMMANDS) >= NEED_SEAT == {"arm", "set", "reset", "commission"}


@pytest.mark.parametrize("name", sorted(NEED_SEAT))
def test_without_control_it_is_refused(lab: Lab, name: str) -> None:
    """By name of who has it."""
    lab.ready()
    with pytest.raises(CommandRefused, match="control is with me"):
        lab.ask(name, ticket=OTHER)


def test_an_unknown_command_is_refused(lab: Lab) -> None:
    """With the list of those that exist."""
    lab.ready()
    with pytest.raises(CommandRefused, match="one of arm, cancel"):
        lab.core.command(lab.now_s, "explode", {}, "somebody")


@pytest.mark.parametrize("args", [
    {}, {"causes": "restarted"}, {"causes": []}, {"causes": ["restarted", "gremlins"]}, {"causes": [None]},
    {"causes": {"restarted": 1}}])
def test_a_reset_names_causes_that_exist(lab: Lab, args: dict[str, object]) -> None:
    """Anything else is refused here already, whatever a socket sends."""
    lab.greet().ask("seat.take")
    with pytest.raises(CommandRefused, match="causes by their words"):
        lab.ask("reset", **args)
    assert lab.core.state.latched == Cause.RESTARTED


def test_a_host_rule_that_is_not_known_can_still_be_named(lab: Lab) -> None:
    """A newer host's rule is told by its number, and reset by that word or the plain one."""
    lab.ready()
    lab.core.host_rule = 777
    ticket = lab.ask("reset", causes=["host: rule 777"])["ticket_number"]
    lab.pass_s(0.1)
    assert lab.core.replies[ticket] == "refused: causes"


def test_stops_without_a_port_are_refused_with_what_to_do(lab: Lab) -> None:
    """An interface that cannot stop says so."""
    for verb in ("lower", "cut"):
        with pytest.raises(CommandRefused, match="emergency switching off"):
            lab.ask(verb)


def test_a_stop_works_on_an_idle_bench_and_for_anyone(lab: Lab) -> None:
    """Nothing was live, nothing ends; the cut is confirmed all the same."""
    lab.ready()
    assert lab.ask("lower", ticket=OTHER) == {"lowering": False}
    assert lab.ask("cut", ticket=OTHER)["number"] > 0
    lab.pass_s(0.2)
    assert lab.core.stop_decided_s is None


def test_nothing_is_armed_or_cancelled_where_nothing_is_prepared(lab: Lab) -> None:
    """Said, not done."""
    lab.ready()
    for name in ("arm", "cancel"):
        with pytest.raises(CommandRefused):
            lab.ask(name)
    with pytest.raises(CommandRefused, match="direct run"):
        lab.ask("set", volts=1.0, amps=1e-3)


def test_control_may_be_checked_with_a_stop_unacknowledged(lab: Lab) -> None:
    """Whoever holds the seat open for others sees the stop and keeps the seat."""
    lab.ready()
    lab.ask("cut", ticket=OTHER)
    assert lab.ask("seat.check") == {"holder": "me", "stopped_by": "other"}
    with pytest.raises(CommandRefused):
        lab.ask("seat.check", ticket=OTHER)


def test_commissioning_is_for_an_idle_bench_with_the_interlock_open(lab: Lab) -> None:
    """Not while armed, not with the loop closed."""
    lab.ready().prepare()
    with pytest.raises(CommandRefused, match="interlock closed"):
        lab.ask("commission")
    lab.arm()
    with pytest.raises(CommandRefused, match="idle bench"):
        lab.ask("commission")


def test_nobody_is_told_stored_without_a_number(lab: Lab) -> None:
    """A number or a refusal."""
    lab.ready()
    with pytest.raises(CommandRefused):
        lab.core.command(lab.now_s, "stored", {"number": "7"}, "somebody")


def test_a_cancel_before_the_answer_voids_what_may_have_been_taken(lab: Lab) -> None:
    """Arm and cancel in one breath: the cut goes first, the arm never leads on."""
    lab.ready().prepare()
    lab.ask("arm")
    lab.ask("cancel", ticket=OTHER)
    lab.pass_s(0.2).press().pass_s(5.0)
    assert lab.permission is Permission.IDLE
    assert not lab.released()
    lab.closed()
