"""Values of a plan."""

import pytest

from hvhost.plan.plan import Value
from hvhost.words.quantities import Dimension


def test_a_value_without_its_parameter_is_not_guessed() -> None:
    """A parameter that nothing fills raises."""
    value = Value(factor=0.5, parameter="u", dimension=Dimension.VOLT, needs=Dimension.VOLT)
    assert value.of({"u": 8.0}) == 4.0
    with pytest.raises(KeyError):
        value.of({})


def test_bounds_are_told_in_words() -> None:
    """Which bound is broken, with its unit; nothing where all are kept."""
    value = Value(factor=1.0, dimension=Dimension.PERCENT, needs=Dimension.PERCENT, above=0.0, high=0.2)
    assert value.outside(0.0) == "more than 0 %"
    assert value.outside(0.21) == "at most 20 %"
    assert value.outside(0.2) == ""
