"""The right to command: one holder, taken by an act, missed by the second."""

import pytest

from hvhost.supervisor.seat import Seat
from hvhost.words.errors import CommandRefused


def test_one_holder_at_a_time_and_a_takeover_needs_a_reason() -> None:
    """The second is told who has it."""
    seat = Seat()
    assert seat.take("a", "1", 0.0) == ""
    with pytest.raises(CommandRefused, match="control is with a"):
        seat.take("b", "2", 1.0)
    assert seat.take("b", "2", 1.0, reason="a went home") == "a"
    assert seat.holds("2")
    assert not seat.holds("1")


def test_only_the_holder_may_command() -> None:
    """Nobody, another, and the holder."""
    seat = Seat()
    with pytest.raises(CommandRefused, match="nobody has it"):
        seat.require("1")
    seat.take("a", "1", 0.0)
    with pytest.raises(CommandRefused, match="stopping needs no control"):
        seat.require("2")
    seat.require("1")


def test_a_stop_by_someone_else_is_acknowledged_first_and_ones_own_is_not() -> None:
    """Who stopped knows; who was stopped must look."""
    seat = Seat()
    seat.take("a", "1", 0.0)
    seat.stopped("1", "a")
    seat.require("1")
    seat.stopped("2", "b")
    with pytest.raises(CommandRefused, match="stopped by b"):
        seat.require("1")
    with pytest.raises(CommandRefused):
        seat.acknowledge("2")
    seat.acknowledge("1")
    seat.require("1")


def test_the_empty_seat_is_timed_from_its_release() -> None:
    """Held: zero; released: the seconds since; another's ticket releases nothing."""
    seat = Seat()
    seat.take("a", "1", 5.0)
    assert seat.empty_s(100.0) == 0.0
    assert not seat.release("2", 100.0)
    assert seat.release("1", 100.0)
    assert seat.empty_s(103.0) == 3.0


def test_taking_an_empty_seat_forgets_the_last_holders_stop() -> None:
    """The stop was for who had control then."""
    seat = Seat()
    seat.take("a", "1", 0.0)
    seat.stopped("2", "b")
    seat.release("1", 1.0)
    seat.take("c", "3", 2.0)
    assert seat.stopped_by == ""
    seat.require("3")  # raises where a stop stands
