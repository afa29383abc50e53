"""``hvhost speed``: the table, the JSON, the exit code."""

import json
from typing import Any

import pytest

from hvhost.cli import speed
from hvhost.speed import budgets
from hvhost.speed.figures import Line
from hvhost.speed.setting import Setting


def taken(monkeypatch: pytest.MonkeyPatch, measured: float) -> list[Setting]:
    """Put one made-up line in place of every measurement; returns the settings that were handed over."""
    seen: list[Setting] = []

    def measure(setting: Setting, chosen: tuple[str, ...]) -> list[Line]:
        seen.append(setting)
        return [Line(budget=chosen[0], what="w", measured=measured, bound=1.0, unit="x", against="a")]

    monkeypatch.setattr(budgets, "measure", measure)
    return seen


@pytest.mark.parametrize(("measured", "code", "last"), [
    (1.0, 0, "every bound holds"), (1.5, 1, "1 of 1 bounds not held: B7")])
def test_the_exit_code_says_whether_every_bound_holds(monkeypatch: pytest.MonkeyPatch, measured: float, code: int,
                                                     last: str, capsys: pytest.CaptureFixture[str]) -> None:
    """0 when all do, 1 otherwise."""
    taken(monkeypatch, measured)
    assert speed.run(["--only", "B7"]) == code
    assert capsys.readouterr().out.splitlines()[-1] == last


def test_json_holds_the_same_with_the_raw_figures(monkeypatch: pytest.MonkeyPatch,
                                                  capsys: pytest.CaptureFixture[str]) -> None:
    """One object; --quick is said in it, and shortens what needs patience."""
    seen = taken(monkeypatch, 0.5)
    assert speed.run(["--only", "B7", "--quick", "--json"]) == 0
    told: dict[str, Any] = json.loads(capsys.readouterr().out)
    assert told["quick"] is True
    assert told["held"] is True
    assert told["lines"][0]["budget"] == "B7"
    assert "raw" in told["lines"][0]
    assert seen[0].minutes < 1.0


def test_progress_is_silent_for_two_seconds(capsys: pytest.CaptureFixture[str]) -> None:
    """What ends at once says nothing on the way."""
    teller = speed.Teller()
    teller.say("something")
    teller.end()
    assert capsys.readouterr().err == ""
