"""Which budgets are measured, by what, and how they are chosen."""

from importlib import import_module

import pytest

from hvhost.speed import budgets
from hvhost.speed.figures import Line
from hvhost.speed.setting import Setting
from hvhost.words.errors import CommandRefused


def test_every_place_of_the_table_is_a_measurement() -> None:
    """Module and function exist."""
    for places in budgets.MEASURES.values():
        for place in places:
            module, _, function = place.partition(":")
            assert callable(getattr(import_module(f"hvhost.speed.{module}"), function))


def test_budgets_are_chosen_by_name_in_the_tables_order() -> None:
    """In any case and order; none named means all."""
    assert budgets.chosen("b7, B1") == ("B1", "B7")
    assert budgets.chosen("") == budgets.BUDGETS
    with pytest.raises(CommandRefused, match="any of B1"):
        budgets.chosen("B1,B99")


def test_a_measurement_that_serves_two_budgets_is_taken_once(setting: Setting,
                                                              monkeypatch: pytest.MonkeyPatch) -> None:
    """Only the lines of the chosen budgets are kept, in the order of their numbers."""
    taken: list[str] = []

    def of(place: str) -> budgets.Measure:
        def measure(_: Setting) -> list[Line]:
            taken.append(place)
            return [Line(budget=name, what=place, measured=1.0, bound=1.0, unit="", against="-")
                    for name in ("B9", "B8")]
        return measure

    monkeypatch.setattr(budgets, "_of", of)
    lines = budgets.measure(setting, ("B8", "B9"))
    assert taken == ["recording:measure", "rehearsing:measure"]
    assert [line.budget for line in lines] == ["B8", "B8", "B9", "B9"]
    assert [line.budget for line in budgets.measure(setting, ("B9",))] == ["B9"]
