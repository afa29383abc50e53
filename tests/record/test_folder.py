"""Run folders: made whole or not at all."""

import os
from pathlib import Path

import pytest

from hvhost.record import folder as folder_module
from hvhost.record.folder import RunFolder, stamp, write_synced
from hvhost.words.errors import RecordFault
from tests.record.making import OPENED_NS, made_meta

TEXTS = {"bench.yaml": "bench: µ\n"}


def made(root: Path, **more: int) -> RunFolder:
    """Create the usual folder."""
    return RunFolder.create(root, "0007", OPENED_NS, made_meta().to_json(), TEXTS, **more)


def test_a_folder_holds_the_checked_texts_byte_for_byte(tmp_path: Path) -> None:
    """The texts are as they were checked, and META stands beside them without repeating them."""
    folder = made(tmp_path / "runs")
    assert folder.name == "20270115T080000Z-0007"
    assert (folder.path / "bench.yaml").read_text("utf-8") == TEXTS["bench.yaml"]
    assert '"run": "0007"' in (folder.path / "meta.json").read_text()
    assert "bench: x" not in (folder.path / "meta.json").read_text()
    assert not folder.closed


def test_the_stamp_is_utc() -> None:
    """Folder names sort by UTC (1 800 000 000 s is 2027-01-15 08:00:00, by GNU date)."""
    assert stamp(OPENED_NS) == "20270115T080000Z"


def test_a_name_that_is_taken_is_refused(tmp_path: Path) -> None:
    """A second run of the same number in the same second does not overwrite the first."""
    made(tmp_path)
    with pytest.raises(RecordFault, match="name is taken"):
        made(tmp_path)


def test_a_full_disk_is_refused_before_anything_is_made(tmp_path: Path) -> None:
    """Without room for a run nothing is opened, and the sentence says how much there is."""
    with pytest.raises(RecordFault, match=r"MiB free.*make room"):
        made(tmp_path, free_min=1 << 62)
    assert list(tmp_path.iterdir()) == []


def test_a_place_that_is_a_file_is_refused(tmp_path: Path) -> None:
    """A runs folder that is a file gives a sentence with its remedy."""
    (tmp_path / "runs").write_text("")
    with pytest.raises(RecordFault, match="run folder that can be written"):
        made(tmp_path / "runs")


def test_a_place_without_permission_is_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """No permission (also where the tests run as root) gives the remedy."""
    def forbidden(*_: object, **__: object) -> None:
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(folder_module, "write_synced", forbidden)
    with pytest.raises(RecordFault, match=r"Permission denied.*write permission"):
        made(tmp_path)
    assert not (tmp_path / "20270115T080000Z-0007").exists()


def test_what_an_earlier_attempt_left_half_made_is_cleared(tmp_path: Path) -> None:
    """A crash while a folder was being made does not stand in the way."""
    half = tmp_path / ".20270115T080000Z-0007.new"
    half.mkdir()
    (half / "bench.yaml").write_text("old")
    made(tmp_path)
    assert not half.exists()


def test_a_folder_without_a_run_is_not_opened(tmp_path: Path) -> None:
    """Opening any other folder says what is missing."""
    with pytest.raises(RecordFault, match=r"run\.hvb"):
        RunFolder.at(tmp_path)
    folder = made(tmp_path)
    assert RunFolder.at(folder.path) == folder


def test_a_file_is_replaced_whole(tmp_path: Path) -> None:
    """Nothing of a temporary name is left."""
    write_synced(tmp_path / "a", b"1")
    write_synced(tmp_path / "a", b"2")
    assert os.listdir(tmp_path) == ["a"]
