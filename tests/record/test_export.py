"""The export's own process."""

import sys
from pathlib import Path

import pytest

from hvhost.record import export as export_module
from hvhost.record.export import export_command, export_in_child
from hvhost.record.folder import RunFolder
from tests.record.making import Case, made_run


def test_the_child_writes_the_file(tmp_path: Path) -> None:
    """A real child process leaves the Parquet file beside the record."""
    folder = made_run(tmp_path, Case(hold_s=0.1))
    assert export_in_child(folder).path == folder.path / "samples.parquet"
    assert (folder.path / "samples.parquet").read_bytes()[:4] == b"PAR1"


def test_a_child_that_fails_is_a_sentence(tmp_path: Path) -> None:
    """A folder without a run gives the child's own sentence and no file."""
    done = export_in_child(RunFolder(tmp_path))
    assert done.path is None
    assert "expected a run folder" in done.fault


def test_a_child_that_hangs_is_given_up(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """After its time the child is ended and the run is closed without the file."""
    monkeypatch.setattr(export_module, "export_command",
                        lambda folder, path: (sys.executable, "-c", "import threading; threading.Event().wait()"))
    assert "did not run" in export_in_child(RunFolder(tmp_path), timeout_s=0.3).fault


def test_the_command_names_the_folder(tmp_path: Path) -> None:
    """The child is started by module name, as anyone can."""
    assert export_command(RunFolder(tmp_path))[1:] == ("-m", "hvhost.record.parquet", str(tmp_path))
