"""The catalogue, rebuilt from the folders."""

import json
from pathlib import Path

import pytest

from hvhost.record.catalogue import find_run, list_runs, unclosed
from hvhost.record.folder import RunFolder
from hvhost.record.manifest import append_revision, write_manifest
from hvhost.words.errors import CommandRefused
from tests.record.making import OPENED_NS, made_meta


def made(root: Path, run: str, seconds: int, result: dict[str, object] | None = None) -> RunFolder:
    """A folder with META and perhaps a result."""
    opened = OPENED_NS + seconds * 1_000_000_000
    folder = RunFolder.create(root, run, opened, made_meta(run=run, opened_utc_ns=opened).to_json(), {})
    if result is not None:
        (folder.path / "result.json").write_text(json.dumps(result))
        write_manifest(folder)
    return folder


def test_runs_are_listed_oldest_first_with_what_they_tell(tmp_path: Path) -> None:
    """Each run is one line; strangers' folders and half-made ones are passed over."""
    made(tmp_path, "0002", 60, {"outcome": "finished", "verdict": "pass", "highest_v": 1e4, "breakdown_v": None})
    made(tmp_path, "0001", 0)
    (tmp_path / "notes").mkdir()
    (tmp_path / ".20270115T090000Z-0003.new").mkdir()
    first, second = list_runs(tmp_path)
    assert (first.run, first.outcome, first.verdict, first.specimen) == ("0001", "open", "", "S-1")
    assert (second.run, second.outcome, second.verdict, second.highest_v) == ("0002", "finished", "pass", 1e4)
    assert json.loads(json.dumps(second.to_json))["path"] == str(second.path)
    assert [f.name for f in unclosed(tmp_path)] == [first.path.name]
    assert list_runs(tmp_path / "absent") == ()


def test_a_revision_with_a_result_replaces_the_first_one(tmp_path: Path) -> None:
    """The catalogue shows the latest result, and how many revisions there are."""
    folder = made(tmp_path, "0001", 0, {"outcome": "finished", "verdict": "pass"})
    append_revision(folder, "result", {"result": {"outcome": "finished", "verdict": "not decided"}}, utc_ns=1)
    (summary,) = list_runs(tmp_path)
    assert (summary.verdict, summary.revisions) == ("not decided", 1)


def test_a_damaged_meta_is_said_and_stops_nothing(tmp_path: Path) -> None:
    """One bad folder does not hide the others."""
    (made(tmp_path, "0001", 0).path / "meta.json").write_text("{")
    made(tmp_path, "0002", 9)
    assert [s.outcome for s in list_runs(tmp_path)] == ["damaged", "open"]


def test_a_run_is_found_by_number_name_or_beginning(tmp_path: Path) -> None:
    """What is unique is enough; what is not is refused."""
    made(tmp_path, "0001", 0)
    last = made(tmp_path, "0012", 60)
    assert find_run(tmp_path, "0012").path == find_run(tmp_path, "last").path == last.path
    assert find_run(tmp_path, "20270115T0801").path == last.path
    for name in ("00", "7"):
        with pytest.raises(CommandRefused, match="one run named"):
            find_run(tmp_path, name)
