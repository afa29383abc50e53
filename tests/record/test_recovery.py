"""Closing what a crash left open."""

import fcntl
import os
from pathlib import Path

import pytest

from hvhost.record import manifest as manifest_module
from hvhost.record.blockfile import read_buffer
from hvhost.record.entries import BlockEntry, Entry
from hvhost.record.folder import RunFolder
from hvhost.record.manifest import check_folder, revisions_of
from hvhost.record.recovery import being_written, recover_run
from hvhost.words.errors import RecordFault
from tests.record.making import OPENED_NS, Case, made_meta, made_run


@pytest.fixture
def folder(tmp_path: Path) -> RunFolder:
    """A run that was killed in the middle of an entry."""
    made = made_run(tmp_path / "runs", Case(hold_s=0.5, end=False))
    data = made.blocks.read_bytes()
    made.blocks.write_bytes(data[:-11])
    return made


def test_an_unclosed_run_is_recovered_as_interrupted_and_not_altered(folder: RunFolder) -> None:
    """The original keeps every byte; the revision tells outcome, damage and how far the record reaches."""
    data = folder.blocks.read_bytes()
    found = recover_run(folder, utc_ns=5)
    assert (found.done, found.outcome) == (True, "interrupted")
    assert len(found.damage) == 1
    assert "torn" in found.damage[0]
    assert folder.blocks.read_bytes() == data
    (revision,) = revisions_of(folder)
    assert revision["kind"] == "recovered"
    assert revision["data"]["torn"]
    assert revision["data"]["block_file"]["bytes"] == len(data)
    assert check_folder(folder).sound


def test_recovery_done_twice_does_nothing_more(folder: RunFolder) -> None:
    """The second recovery finds the run closed and says the same outcome."""
    recover_run(folder, utc_ns=5)
    files = {p: p.read_bytes() for p in folder.path.rglob("*") if p.is_file()}
    again = recover_run(folder, utc_ns=6)
    assert (again.done, again.outcome) == (False, "interrupted")
    assert {p: p.read_bytes() for p in folder.path.rglob("*") if p.is_file()} == files


class Killed(Exception):
    """The process died here."""


@pytest.mark.parametrize("call", range(1, 12))
def test_a_crash_at_any_step_of_recovery_is_recovered_from(folder: RunFolder, call: int,
                                                           monkeypatch: pytest.MonkeyPatch) -> None:
    """Killed at the n-th fsync or rename of recovery, done again: the same revision once, a sound folder."""
    count = 0
    real_sync, real_replace = os.fsync, Path.replace

    def counted() -> None:
        nonlocal count
        count += 1
        if count == call:
            raise Killed

    def sync(descriptor: int) -> None:
        counted()
        real_sync(descriptor)

    def replace(self: Path, target: Path) -> Path:
        counted()
        return real_replace(self, target)

    monkeypatch.setattr(os, "fsync", sync)
    monkeypatch.setattr(Path, "replace", replace)
    try:
        recover_run(folder, utc_ns=5)
    except Killed:
        monkeypatch.undo()
        recover_run(folder, utc_ns=6)
    assert [r["kind"] for r in revisions_of(folder)] == ["recovered"]
    assert revisions_of(folder)[0]["data"]["outcome"] == "interrupted"
    assert check_folder(folder).sound


def test_a_run_that_is_still_being_written_is_left_alone(folder: RunFolder) -> None:
    """While a recorder holds the file, recovery is refused."""
    descriptor = os.open(folder.blocks, os.O_WRONLY)
    fcntl.flock(descriptor, fcntl.LOCK_EX)
    assert being_written(folder)
    with pytest.raises(RecordFault, match="nobody writes"):
        recover_run(folder, utc_ns=5)
    os.close(descriptor)
    assert recover_run(folder, utc_ns=5).done


def test_a_run_whose_recorder_ended_keeps_its_outcome(tmp_path: Path) -> None:
    """A crash between END and the manifest does not turn a finished run into an interrupted one."""
    folder = made_run(tmp_path, Case(hold_s=0.2))
    assert recover_run(folder, utc_ns=1).outcome == "finished"


def test_a_folder_without_a_block_file_is_recovered_too(tmp_path: Path) -> None:
    """A crash just after the folder was made leaves a run without samples, closed as interrupted."""
    folder = RunFolder.create(tmp_path, "1", OPENED_NS, made_meta().to_json(), {})
    assert not being_written(folder)
    assert recover_run(folder, utc_ns=1).pairs == 0
    assert check_folder(folder).sound


@pytest.mark.parametrize("cut", [0, 1, 7, 300, 5000])
def test_whatever_is_left_of_the_file_recovery_ends(folder: RunFolder, cut: int) -> None:
    """Cut anywhere, an empty file included, the run is closed and the samples that are whole are counted."""
    data = folder.blocks.read_bytes()[:cut]
    folder.blocks.write_bytes(data)
    found = recover_run(folder, utc_ns=1)
    assert found.done
    whole = [e.content.block.pairs for e in read_buffer(data) if isinstance(e, Entry)
             and isinstance(e.content, BlockEntry)]
    assert found.pairs == sum(whole)
    assert check_folder(folder).sound
    assert folder.blocks.read_bytes() == data


def test_late_evidence_follows_the_recovery(folder: RunFolder) -> None:
    """Causes fetched after relinking are appended behind the recovery, whose files stay as they were."""
    recover_run(folder, utc_ns=5)
    manifest_module.append_revision(folder, "evidence", {"causes": ["breakdown"]}, utc_ns=9)
    assert [r["kind"] for r in revisions_of(folder)] == ["recovered", "evidence"]
    assert check_folder(folder).sound
