"""B11 in a tiny form."""

import pytest

from hvhost.speed import starting
from hvhost.speed.setting import Setting
from tests.speed.shape import check


def test_help_is_timed_beside_a_bare_start(setting: Setting, monkeypatch: pytest.MonkeyPatch) -> None:
    """Starts of both, in turn."""
    monkeypatch.setattr(starting, "STARTS", 1)
    (line,) = starting.measure(setting)
    check([line], "B11")
    assert line.raw["blocks"] == 2
