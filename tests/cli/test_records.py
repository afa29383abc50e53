"""The commands over closed runs: ``show``, ``runs``, ``recover``, ``replay``."""

import json
import shutil
from pathlib import Path

import pytest

from hvhost.cli import exits, recover, replay, runs, show
from hvhost.words.errors import HvhostError
from tests.cli.conftest import Rehearsed


def test_show_prints_the_page_and_gives_the_verdict_s_code(rehearsed: Rehearsed,
                                                           capsys: pytest.CaptureFixture[str]) -> None:
    """Computed anew from the record; ``--json`` is one document with the same verdict."""
    name = rehearsed.folder.name.rpartition("-")[2]
    assert show.run([name, "--runs", str(rehearsed.root)]) == exits.PASSED
    page = capsys.readouterr().out
    assert "pass" in page
    assert "DEMO-1" in page
    assert show.run([str(rehearsed.folder), "--runs", str(rehearsed.root), "--json"]) == exits.PASSED
    assert '"pass"' in capsys.readouterr().out


def test_runs_lists_it(rehearsed: Rehearsed, capsys: pytest.CaptureFixture[str]) -> None:
    """One line a run; as JSON one object a line; a filter leaves out what does not fit."""
    assert runs.run(["--runs", str(rehearsed.root)]) == exits.PASSED
    assert len(capsys.readouterr().out.splitlines()) == 1
    assert runs.run(["--runs", str(rehearsed.root), "--json"]) == exits.PASSED
    assert json.loads(capsys.readouterr().out)["outcome"] == "finished"
    assert runs.run(["--runs", str(rehearsed.root), "--where", "verdict = fail"]) == exits.PASSED
    assert capsys.readouterr().out == ""


def test_replay_finds_the_same_verdicts(rehearsed: Rehearsed, capsys: pytest.CaptureFixture[str]) -> None:
    """The record back through the same core parts nowhere."""
    assert replay.run([str(rehearsed.folder), "--runs", str(rehearsed.root), "--json"]) == exits.PASSED
    told = json.loads(capsys.readouterr().out)
    assert not told["parted"]
    assert told["pairs"] > 1000


def test_recover_closes_what_a_crash_left(rehearsed: Rehearsed, tmp_path: Path,
                                          capsys: pytest.CaptureFixture[str]) -> None:
    """A folder without its manifest is closed, once; the second time there is nothing to do."""
    root = tmp_path / "runs"
    shutil.copytree(rehearsed.root, root)
    folder = root / rehearsed.folder.name
    for name in ("manifest.sha256", "result.json", "page.txt", "samples.parquet"):
        (folder / name).unlink()
    assert recover.run(["--runs", str(root)]) == exits.PASSED
    assert folder.name in capsys.readouterr().out
    assert (folder / "manifest.sha256").exists()
    assert recover.run(["--runs", str(root)]) == exits.PASSED
    assert capsys.readouterr().out == "no run is open\n"
    assert recover.run([folder.name, "--runs", str(root)]) == exits.PASSED
    assert "closed already" in capsys.readouterr().out


@pytest.mark.parametrize("command", [show, replay, recover])
def test_no_such_run(command: object, tmp_path: Path) -> None:
    """A run that is not there is refused by name."""
    with pytest.raises(HvhostError, match="261201n9"):
        command.run(["261201n9", "--runs", str(tmp_path)])  # type: ignore[attr-defined]
