"""Values made for every block: equal by content, slotted, usable in sets, by position or by name."""

import dataclasses

import pytest

from hvhost.words.values import swift, swift_by_name


@swift
class Point:
    """Two numbers."""

    x: int
    y: int = 0


@swift_by_name
class Named:
    """Two numbers by name."""

    x: int
    y: int


def test_a_swift_value_is_equal_by_content_and_has_a_hash() -> None:
    """Two values with the same fields are one in a set."""
    assert Point(1, 2) == Point(1, 2)
    assert len({Point(1), Point(1, 0), Point(2)}) == 2


def test_a_swift_value_takes_no_field_that_it_does_not_have() -> None:
    """Slots: a misspelt name is an error, not a new attribute."""
    with pytest.raises(AttributeError):
        Point(1).z = 3  # type: ignore[attr-defined]


def test_replacing_a_field_gives_another_value() -> None:
    """The first stays as it was."""
    first = Named(x=1, y=2)
    assert dataclasses.replace(first, y=3) == Named(x=1, y=3)
    assert first.y == 2


def test_a_value_by_name_refuses_positions() -> None:
    """Fields that are easily swapped are given by name."""
    with pytest.raises(TypeError):
        Named(1, 2)  # type: ignore[misc]
