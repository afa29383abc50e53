"""Dataclasses and plain values: what is written comes back, what is wrong is refused with its place."""

import math
from dataclasses import dataclass
from enum import StrEnum
from typing import NamedTuple

import pytest

from hvhost.publish.values import plain, typed
from hvhost.words.errors import WireFault


class Colour(StrEnum):
    """Two words."""

    GREY = "grey"
    BLUE = "blue"


class Pair(NamedTuple):
    """Two numbers."""

    x: float
    y: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Inner:
    """A part."""

    colour: Colour
    share: float | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Outer:
    """A whole."""

    name: str
    count: int = 0
    inner: Inner | None = None
    pairs: tuple[Pair, ...] = ()


WHOLE = Outer(name="a", count=3, inner=Inner(colour=Colour.BLUE, share=0.5), pairs=(Pair(1.0, 2.0),))


def test_a_whole_goes_there_and_back() -> None:
    """Enums become words, named pairs short lists, and all come back."""
    data = plain(WHOLE)
    assert data == {"name": "a", "count": 3, "inner": {"colour": "blue", "share": 0.5}, "pairs": [[1.0, 2.0]]}
    assert typed(data, Outer, "whole") == WHOLE


@pytest.mark.parametrize("bad", [math.nan, math.inf, -math.inf])
def test_a_number_that_is_none_becomes_none(bad: float) -> None:
    """JSON knows no NaN."""
    assert plain(Inner(colour=Colour.GREY, share=bad)) == {"colour": "grey", "share": None}


@pytest.mark.parametrize(("data", "place"), [
    ({"name": 1}, "whole.name"), ({"name": "a", "count": True}, "whole.count"), ({}, "whole"),
    ({"name": "a", "inner": {"colour": "red"}}, "whole.inner.colour"),
    ({"name": "a", "pairs": [[1.0]]}, "whole.pairs[0]"),
    ({"name": "a", "pairs": [[1.0, "2"]]}, "whole.pairs[0]"), ([], "whole"),
])
def test_a_wrong_kind_is_refused_with_its_place(data: object, place: str) -> None:
    """The fault names the field."""
    with pytest.raises(WireFault) as caught:
        typed(data, Outer, "whole")
    assert caught.value.where == place


def test_unknown_fields_are_skipped() -> None:
    """A reader goes on with a writer that says more."""
    assert typed({"name": "a", "weather": "rain"}, Outer, "whole") == Outer(name="a")
