"""The trip beside a crowd, in a tiny form."""

import pytest

from hvhost.speed import crowd
from hvhost.speed.setting import Setting
from tests.speed.shape import check


def test_trips_are_timed_with_the_crowd_at_work_and_at_rest(setting: Setting, monkeypatch: pytest.MonkeyPatch) -> None:
    """One line: the ratio, and what the crowd was given meanwhile."""
    monkeypatch.setattr(crowd, "CLIENTS", 5)
    lines = crowd.measure(setting)
    check(lines, "B2")
    assert len(lines) == 1
    assert lines[0].bound == crowd.BOUND
    assert lines[0].raw["per_block"] == 5
    assert " answers and " in lines[0].note
