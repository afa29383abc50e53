"""B8 in a tiny form."""

import pytest

from hvhost.speed import recording
from hvhost.speed.setting import Setting
from tests.speed.shape import check


def test_append_power_cut_and_flipped_bits_are_told(setting: Setting, monkeypatch: pytest.MonkeyPatch) -> None:
    """One flipped bit takes one block and tells of it, live and at rest: that is exact, and so it is checked here."""
    monkeypatch.setattr(recording, "SYNC_WATCH_QUICK_S", 0.2)
    lines = recording.measure(setting)
    check(lines, "B8")
    flips = [line for line in lines if "flipped" in line.what]
    assert [(line.measured, line.raw["least"], line.raw["silent"]) for line in flips] == [(1.0, 1, 0)] * 2


def test_an_entry_is_exposed_from_its_queueing_to_the_sync_that_covers_it() -> None:
    """What was queued after a sync began waits for the next one."""
    assert list(recording._exposure([1.0, 1.2, 1.9], [1.5, 2.0])) == pytest.approx([0.5, 0.1])
