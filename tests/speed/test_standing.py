"""B6, B14 and the cut of B11 in a tiny form: a daemon as a process, its stand-in in this one."""

import os

import pytest

from hvhost.speed import standing
from hvhost.speed.setting import Setting
from tests.speed.shape import check


def test_the_daemon_is_watched_in_an_energised_run(setting: Setting) -> None:
    """Memory, growth, descriptors, and the processor beside them, which judges nothing."""
    lines = standing.measure_memory(setting)
    check(lines, "B5", "B6")
    assert [line.budget for line in lines] == ["B6", "B6", "B6", "B5"]
    assert lines[0].measured > 10.0
    assert not lines[3].judged


def test_restart_and_cut_are_timed(setting: Setting, monkeypatch: pytest.MonkeyPatch) -> None:
    """Killed in a run, started again; and a cut from the shell."""
    monkeypatch.setattr(standing, "QUICK_RESTARTS", 1)
    check(standing.measure_restart(setting), "B14")
    check(standing.measure_cut(setting), "B11")


def test_a_process_is_looked_at_by_its_number() -> None:
    """This one has memory, descriptors and has used the processor."""
    seen = standing.look(os.getpid())
    assert seen.resident > 1e6
    assert seen.descriptors > 2
    assert seen.cpu_s > 0.0
