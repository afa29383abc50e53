"""The events of a link are plain frozen values."""

import dataclasses

import pytest

from hvhost.wire import events
from hvhost.wire.events import Dropped, DropWhy, Silent
from hvhost.wire.frames import Info


def test_every_event_is_frozen() -> None:
    """No event can be changed by whoever is handed it first."""
    for kind in events.LinkEvent.__args__:
        assert dataclasses.is_dataclass(kind)
        assert kind.__dataclass_params__.frozen  # type: ignore[attr-defined]
    with pytest.raises(dataclasses.FrozenInstanceError):
        Silent(1.0).age_s = 2.0  # type: ignore[misc]


def test_a_dropped_request_says_whether_it_left() -> None:
    """Equal drops are equal; whether it was sent is part of it."""
    one = Dropped(1, Info(page=0), DropWhy.STOP, True)
    assert one == Dropped(1, Info(page=0), DropWhy.STOP, True)
    assert one != Dropped(1, Info(page=0), DropWhy.STOP, False)
