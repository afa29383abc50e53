"""B9 in a tiny form."""

import pytest

from hvhost.speed import rehearsing
from hvhost.speed.setting import Setting
from tests.speed.shape import check


def test_a_rehearsal_is_timed_split_and_weighed(setting: Setting, monkeypatch: pytest.MonkeyPatch) -> None:
    """Wall seconds of the command with MCU, plant and host beside them, and the bytes per pair that it left."""
    monkeypatch.setattr(rehearsing, "QUICK_MINUTES", 0.4)
    lines = rehearsing.measure(setting)
    check(lines, "B8", "B9")
    assert [line.budget for line in lines] == ["B9", "B8"]
    assert set(lines[0].raw["split_s"]) == {"host", "plant", "MCU and line"}
    assert "run.hvb" in lines[1].raw["files"]
