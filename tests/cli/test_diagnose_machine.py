"""What a diagnosis says of the machine, each finding in each of its forms."""

import os
import sys
from collections import namedtuple
from dataclasses import replace
from importlib.metadata import version
from pathlib import Path

import pytest

from hvhost.bench.file import load_bench
from hvhost.bench.service import Service
from hvhost.cli import diagnose_machine as dm
from hvhost.cli.diagnosis import Check, Verdict
from hvhost.ports.kernel import ClockState

BENCH = load_bench(Path(__file__).parents[2] / "configs" / "demo.bench.yaml")
Info = namedtuple("Info", "major minor micro releaselevel serial")


def named(checks: list[Check], name: str) -> Check:
    """The check of this name."""
    (found,) = [check for check in checks if check.name == name]
    return found


def test_versions_of_python_and_of_every_required_package() -> None:
    """All that the package asks for, as installed here; extras are not asked for."""
    checks = list(dm.check_versions())
    assert {check.verdict for check in checks} == {Verdict.OK}
    names = {check.name for check in checks}
    assert {"python", "hvhost", "numpy", "pyserial", "pydantic", "rich", "pyyaml"} <= names
    assert "pytest" not in names
    assert named(checks, "numpy").found == version("numpy")


def test_too_old_a_python_and_a_package_too_old_or_missing_are_faults(monkeypatch: pytest.MonkeyPatch) -> None:
    """Each with what is needed."""
    monkeypatch.setattr(sys, "version_info", Info(3, 10, 4, "final", 0))
    wanted = ["numpy>=99.1", "nosuchpackage>=1.0", "rich>=1", "x; extra == 'a'"]
    monkeypatch.setattr(dm, "requires", lambda name: wanted)
    checks = list(dm.check_versions())
    assert named(checks, "python").verdict is Verdict.FAULT
    old = named(checks, "numpy")
    assert old.verdict is Verdict.FAULT
    assert "older than 99.1" in old.found
    absent = named(checks, "nosuchpackage")
    assert absent.text == "fault      nosuchpackage: not installed; pip install 'nosuchpackage>=1.0'"
    assert named(checks, "rich").verdict is Verdict.OK


@pytest.mark.parametrize(("state", "verdict", "part"), [
    (None, Verdict.UNKNOWN, "does not say"),
    (ClockState(False, 16.0), Verdict.ATTENTION, "not synchronised"),
    (ClockState(True, 5.0), Verdict.ATTENTION, "wrong by up to 5 s"),
    (ClockState(True, 0.0021), Verdict.OK, "wrong by at most 2.1 ms")])
def test_the_clock(monkeypatch: pytest.MonkeyPatch, state: ClockState | None, verdict: Verdict, part: str) -> None:
    """Synchronised or not by the kernel's own account."""
    monkeypatch.setattr(dm, "clock_state", lambda: state)
    found = dm.check_clock()
    assert found.verdict is verdict
    assert part in found.found


def test_a_clock_that_was_never_set_is_a_fault(monkeypatch: pytest.MonkeyPatch) -> None:
    """1970 in a record helps nobody."""
    monkeypatch.setattr(dm.time, "time_ns", lambda: 86_400_000_000_000)
    found = dm.check_clock()
    assert found.verdict is Verdict.FAULT
    assert found.found == "1970-01-02"


def test_a_disk_with_room_and_one_without(tmp_path: Path) -> None:
    """Room beside the floor, the time of a synced write, a folder that the first run makes."""
    checks = list(dm.check_disk(BENCH, tmp_path / "runs"))
    assert named(checks, "runs folder").verdict is Verdict.NOTE
    assert named(checks, "disk writing").found.startswith("a synced write takes ")
    assert not (tmp_path / "runs").exists()
    tight = replace(BENCH, service=Service(disk_floor_b=1e15))
    assert named(list(dm.check_disk(tight, tmp_path)), "disk").verdict is Verdict.FAULT


def test_a_folder_that_cannot_be_written_and_a_disk_that_refuses(tmp_path: Path,
                                                                monkeypatch: pytest.MonkeyPatch) -> None:
    """Permission is a fault with its remedy; so is an error of the disk."""
    monkeypatch.setattr(os, "access", lambda path, mode: False)
    assert named(list(dm.check_disk(BENCH, tmp_path)), "runs folder").verdict is Verdict.FAULT
    monkeypatch.undo()

    def refuse(descriptor: int) -> None:
        raise OSError(5, "Input/output error")

    monkeypatch.setattr(os, "fsync", refuse)
    found = named(list(dm.check_disk(BENCH, tmp_path)), "disk writing")
    assert found.verdict is Verdict.FAULT
    assert "Input/output error" in found.found


@pytest.mark.parametrize(("refused", "verdict"), [("", Verdict.OK), ("not permitted; permit it", Verdict.NOTE)])
def test_real_time(monkeypatch: pytest.MonkeyPatch, refused: str, verdict: Verdict) -> None:
    """Permitted, or refused with how to permit it; never left on."""
    given: list[str] = []
    monkeypatch.setattr(dm, "take_realtime", lambda: refused)
    monkeypatch.setattr(dm, "give_back", lambda: given.append("back"))
    assert dm.check_realtime().verdict is verdict
    assert given == ([] if refused else ["back"])


def test_the_loop_is_watched_and_held_against_the_lease() -> None:
    """Whatever the machine does: a lease of 0.1 µs is too short for it, one of an hour is not."""
    long = dm.check_loop(replace(BENCH, lease_s=3600.0), 0.05)
    assert long.verdict is Verdict.OK
    assert "in 0.05 s of a bare loop" in long.found
    short = dm.check_loop(replace(BENCH, lease_s=1e-7), 0.05)
    assert short.verdict is Verdict.ATTENTION
    assert "--realtime" in short.remedy
