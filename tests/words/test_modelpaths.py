"""Known keys at a place, and what of a faulty file was right."""

from typing import Annotated, Literal

import pytest
from pydantic import Field

from hvhost.words.fields import Block, Seconds, Volts
from hvhost.words.modelpaths import Absent, Partial, known_keys, partial_of


class Ramp(Block):
    kind: Literal["ramp"]
    to: Volts


class Hold(Block):
    kind: Literal["hold"]
    time: Seconds
    at: Volts | None = None


class Rest(Block):
    rest: Seconds


class Plan(Block):
    name: str
    first: Rest
    steps: tuple[Annotated[Ramp | Hold, Field(discriminator="kind")], ...] = ()
    by_name: dict[str, Rest] = Field(default_factory=dict)
    rests: tuple[Rest, ...] = ()
    end: Rest | None = None


@pytest.mark.parametrize(("place", "keys"), [
    ((), {"name", "first", "steps", "by_name", "rests", "end"}),
    (("first",), {"rest"}),
    (("steps", 0), {"kind", "to", "time", "at"}),
    (("steps", 0, "ramp"), {"kind", "to", "time", "at"}),
    (("by_name", "anything"), {"rest"}),
    (("rests", 3), {"rest"}),
    (("end",), {"rest"})])
def test_known_keys(place: tuple[str | int, ...], keys: set[str]) -> None:
    """Keys are found through blocks, lists, maps, unions and optional blocks."""
    assert set(known_keys(Plan, place)) == keys


def test_partial_keeps_what_was_right() -> None:
    """Right values are kept to the innermost block, defaults stand in, wrong and missing ones are absent."""
    partial = partial_of(Plan, {"name": "p", "first": {"rest": "1 kV"}, "rests": ({"rest": "2 s"}, {"rest": "?"}),
                                "end": {"rest": "3 s"}})
    assert partial.name == "p"
    assert partial.steps == ()
    assert partial.end.rest == 3.0
    assert partial.rests[0].rest == 2.0
    with pytest.raises(Absent):
        _ = partial.first.rest
    with pytest.raises(Absent):
        _ = partial.rests[1].rest


def test_partial_of_the_wrong_shape_is_empty() -> None:
    """A text where a block is due has no values."""
    with pytest.raises(Absent):
        _ = partial_of(Plan, "text").name
    with pytest.raises(Absent):
        _ = partial_of(Plan, {"first": "text"}).first.rest
    with pytest.raises(Absent):
        _ = partial_of(Plan, {"rests": "text"}).rests


def test_absent_names_the_key() -> None:
    """The exception names what is not there."""
    with pytest.raises(Absent, match="volts"):
        _ = Partial({}).volts
