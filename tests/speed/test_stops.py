"""B3 in a tiny form: every path that this machine has, each beside its bare twin."""

import pytest

from hvhost.speed import stops
from hvhost.speed.setting import Setting
from tests.speed.shape import check


def test_every_path_is_timed(setting: Setting, monkeypatch: pytest.MonkeyPatch) -> None:
    """Local socket, key of the screen, instrument socket, and the broker where there is one."""
    monkeypatch.setattr(stops, "SETTLE_S", 0.2)
    monkeypatch.setattr(stops, "PER_BLOCK", 2)
    lines = stops.measure(setting)
    check(lines, "B3")
    text = "\n".join(line.what for line in lines)
    for path in ("local socket", "key of the screen", "instrument socket"):
        assert f"stop by {path} " in text
    assert lines[-1].unit == "ms"
