"""The catalogue in memory says what the folders say, and reads again only what changed."""

import json
import os
from pathlib import Path

import pytest

from hvhost.record import remembered
from hvhost.record.catalogue import RunSummary, list_runs
from hvhost.record.folder import META, RESULT, RunFolder
from hvhost.record.remembered import RememberedRuns


def make(root: Path, name: str, **meta: object) -> Path:
    """A run folder with its small file only."""
    path = root / name
    path.mkdir(parents=True)
    (path / META).write_text(json.dumps({"run": name, **meta}))
    return path


def later(path: Path) -> None:
    """Let a folder look changed even where the clock of the file system is coarse."""
    told = path.stat()
    os.utime(path, ns=(told.st_atime_ns, told.st_mtime_ns + 1_000_000))


def test_it_says_what_the_catalogue_says(tmp_path: Path) -> None:
    """Runs in order, whatever else lies beside them; an absent root holds none."""
    assert RememberedRuns(tmp_path / "absent").runs() == ()
    for name in ("20260102T000000Z-b", "20260101T000000Z-a"):
        make(tmp_path, name)
    (tmp_path / "notes").mkdir()
    (tmp_path / ".hidden").mkdir()
    (tmp_path / "a-file").write_text("")
    assert RememberedRuns(tmp_path).runs() == list_runs(tmp_path)


def test_only_what_changed_is_read_again(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A second look reads nothing; a result, a revision, a new run and one that is gone are noticed."""
    read: list[str] = []
    true = remembered.summary_of

    def counted(folder: RunFolder) -> RunSummary:
        read.append(folder.path.name)
        return true(folder)

    monkeypatch.setattr(remembered, "summary_of", counted)
    paths = [make(tmp_path, f"r{k}") for k in range(3)]
    runs = RememberedRuns(tmp_path)
    assert len(runs.runs()) == 3
    read.clear()
    assert len(runs.runs()) == 3
    assert read == []
    (paths[1] / RESULT).write_text(json.dumps({"outcome": "finished", "verdict": "pass"}))
    later(paths[1])
    assert [run.verdict for run in runs.runs()] == ["", "pass", ""]
    revisions = paths[2] / "revisions"
    revisions.mkdir()
    later(paths[2])
    runs.runs()
    (revisions / "0001-result.json").write_text(json.dumps({"kind": "result", "data": {"result": {"verdict": "fail"}}}))
    later(revisions)
    assert [run.verdict for run in runs.runs()] == ["", "pass", "fail"]
    read.clear()
    make(tmp_path, "r3")
    (paths[0] / META).unlink()
    paths[0].rmdir()
    assert [run.run for run in runs.runs()] == ["r1", "r2", "r3"]
    assert read == ["r3"]
    assert runs.runs() == list_runs(tmp_path)
