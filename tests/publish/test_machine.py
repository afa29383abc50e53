"""What the machine owes: room for the record, and a loop on time for the lease."""

import os
from dataclasses import replace
from pathlib import Path

import pytest

from hvhost.bench.file import load_bench
from hvhost.bench.service import Service
from hvhost.publish import machine
from hvhost.publish.machine import Machine, free_bytes, short_lease
from hvhost.words.errors import CommandRefused
from hvhost.words.findings import Grade

BENCH = load_bench(Path(__file__).parents[2] / "configs" / "demo.bench.yaml")


def test_free_room_is_asked_of_the_folder_or_of_the_one_it_will_be_made_in(tmp_path: Path) -> None:
    """A runs folder need not exist yet; the kernel's own figure (statvfs) is what counts."""
    told = os.statvfs(tmp_path)
    for folder in (tmp_path, tmp_path / "a" / "b"):
        found = free_bytes(folder)
        assert found is not None
        assert found == pytest.approx(told.f_bavail * told.f_frsize, rel=0.2)
    (tmp_path / "file").write_text("")
    assert free_bytes(tmp_path / "file" / "beneath") is None


def test_below_the_floor_no_run_is_opened(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The refusal names floor, room and folder; at the floor there is room."""
    made = Machine(replace(BENCH, service=Service(disk_floor_b=2e9)), tmp_path)
    monkeypatch.setattr(machine, "free_bytes", lambda folder: 2e9)
    made.require_room()
    assert made.disk.ok
    assert made.disk_text == ""
    monkeypatch.setattr(machine, "free_bytes", lambda folder: 1.9e9)
    with pytest.raises(CommandRefused, match=r"at least 2 GB free.*found 1\.9 GB free") as refused:
        made.require_room()
    assert str(tmp_path) in str(refused.value)
    assert made.disk_text == "the disk of the runs folder has 1.9 GB left, below its floor of 2 GB"


def test_room_that_nobody_can_tell_is_left_to_the_recorder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """No figure is no reason to refuse: the recorder says soon enough."""
    made = Machine(BENCH, tmp_path)
    monkeypatch.setattr(machine, "free_bytes", lambda folder: None)
    made.require_room()
    assert made.disk.ok


def test_a_lease_of_ten_stalls_is_long_enough() -> None:
    """The bound itself: shorter than ten times the worst stall."""
    assert not short_lease(0.5, 0.05)
    assert short_lease(0.5, 0.0501)
    assert not short_lease(0.5, 0.0)


@pytest.mark.parametrize(("rehearsal", "grade"), [(False, Grade.REASON), (True, Grade.NOTE)])
def test_a_short_lease_is_a_finding(tmp_path: Path, rehearsal: bool, grade: Grade) -> None:
    """A reason is needed where something real will be energised; both figures are named."""
    made = Machine(BENCH, tmp_path, rehearsal=rehearsal)
    assert made.findings() == ()
    made.gauge.beat(1.0, 1.06, 0.0)
    (finding,) = made.findings()
    assert finding.grade is grade
    assert finding.text.startswith(f"demo.bench.yaml: {grade}: lease.time: expected at least 10 times this machine's "
                                   "longest stall of the last hour, 60 ms, found 500 ms")


def test_a_short_lease_is_told_once(tmp_path: Path) -> None:
    """The same stall is not said ten times a second; a later one, after calm, is."""
    made = Machine(BENCH, tmp_path)
    made.gauge.beat(1.0, 1.06, 0.0)
    assert "stood still for 60 ms: the lease, 500 ms, is shorter than 10 times that" in made.warning()
    assert made.warning() == ""
    for k in range(1, 8):
        made.gauge.beat(k * 700.0, k * 700.0 + 0.001, 0.0)
    assert made.warning() == ""
    made.gauge.beat(9000.0, 9000.2, 0.0)
    assert "200 ms" in made.warning()


def test_the_record_is_told_both(tmp_path: Path) -> None:
    """What a run's close notes of the machine."""
    made = Machine(BENCH, tmp_path)
    made.gauge.beat(1.0, 1.06, 0.004)
    note = made.note()
    assert note["loop"]["run_s"] == pytest.approx(0.06)
    assert note["loop"]["own_s"] == pytest.approx(0.004)
    assert note["disk_floor_b"] == 500e6
