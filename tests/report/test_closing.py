"""Closing a run's folder."""

import json
from pathlib import Path

import pytest

from hvhost.record.catalogue import list_runs
from hvhost.record.entries import Outcome
from hvhost.record.folder import RunFolder
from hvhost.record.manifest import append_revision, check_folder
from hvhost.record.recorder import Recorder
from hvhost.report import closing
from hvhost.report.closing import close_run, main, page_of, recover_and_close
from hvhost.words.errors import RecordFault
from tests.record.making import OPENED_NS, TAG, Case, made_meta, made_run


def test_a_closed_run_has_everything_and_is_sound(tmp_path: Path) -> None:
    """Result, page, Parquet and the block file at rest, under a manifest that agrees."""
    folder = made_run(tmp_path)
    before = folder.blocks.stat().st_size
    closed = close_run(folder)
    assert {p.name for p in folder.path.iterdir()} == {
        "run.hvb", "meta.json", "bench.yaml", "samples.parquet", "result.json", "page.txt", "manifest.sha256"}
    assert folder.blocks.stat().st_size < before
    assert check_folder(folder).sound
    assert closed.result.verdict == "pass"
    assert json.loads((folder.path / "result.json").read_text())["verdict"] == "pass"
    assert "manifest and files agree" in page_of(folder)
    assert list_runs(tmp_path)[0].verdict == "pass"


def test_a_run_is_closed_once(tmp_path: Path) -> None:
    """A second close is refused and changes nothing."""
    folder = made_run(tmp_path, Case(hold_s=0.2))
    close_run(folder)
    with pytest.raises(RecordFault, match="not closed yet"):
        close_run(folder)
    assert recover_and_close(folder, utc_ns=1) is None


def test_a_run_that_is_being_written_is_not_closed(tmp_path: Path) -> None:
    """While the recorder runs, closing is refused."""
    folder = RunFolder.create(tmp_path, "1", OPENED_NS, made_meta().to_json(), {})
    recorder = Recorder.open(folder, made_meta().to_json(), tag=TAG)
    with pytest.raises(RecordFault, match="nobody writes"):
        close_run(folder)
    recorder.close(Outcome.CANCELLED)
    assert close_run(folder).result.outcome == "cancelled"


def test_an_interrupted_run_is_recovered_with_result_page_and_export(tmp_path: Path) -> None:
    """After a crash the folder is closed as interrupted, the block file untouched, the rest made from what is whole."""
    folder = made_run(tmp_path, Case(end=False))
    data = folder.blocks.read_bytes()[:-9]
    folder.blocks.write_bytes(data)
    closed = recover_and_close(folder, utc_ns=7)
    assert closed is not None
    assert (closed.result.outcome, closed.result.verdict) == ("interrupted", "not decided")
    assert folder.blocks.read_bytes() == data
    assert (folder.path / "samples.parquet").exists()
    assert check_folder(folder).sound
    assert "torn" in (folder.path / "page.txt").read_text()
    assert recover_and_close(folder, utc_ns=8) is None


def test_late_evidence_shows_on_the_page_and_leaves_the_folder_sound(tmp_path: Path) -> None:
    """A revision after the close is listed; the closed files stay as they were."""
    folder = made_run(tmp_path, Case(hold_s=0.2))
    close_run(folder)
    append_revision(folder, "evidence", {"causes": ["restarted"]}, utc_ns=OPENED_NS)
    text = page_of(folder)
    assert "evidence, 2027-01-15 08:00:00 UTC" in text
    assert "manifest and files agree" in text


def test_the_command_prints_the_verdict_or_a_sentence(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """The daemon's child answers in JSON; what cannot be closed is a sentence and a code."""
    folder = made_run(tmp_path / "runs", Case(hold_s=0.2))
    assert main([str(folder.path)]) == 0
    assert json.loads(capsys.readouterr().out)["verdict"] == "not decided"
    assert main([str(folder.path)]) == 7
    assert main([]) == 2
    assert "not closed yet" in capsys.readouterr().err


@pytest.mark.parametrize("step", ["page", "export_in_child", "repack", "write_manifest"])
def test_a_crash_while_closing_leaves_an_open_run_that_recovery_closes_whole(
        tmp_path: Path, monkeypatch: pytest.MonkeyPatch, step: str) -> None:
    """Nothing is due before the manifest stands; afterwards the result is whole and due to be handed over."""
    bench = {"file": "b.yaml", "text": "", "own_f": 500e-12, "own_s": 0.0, "bandwidth_hz": 160.0, "archive": True}
    folder = made_run(tmp_path, Case(hold_s=0.2, meta={"bench": bench}))

    class Died(BaseException):
        pass

    def die(*_: object, **__: object) -> None:
        raise Died

    with monkeypatch.context() as patch:
        patch.setattr(closing, step, die)
        with pytest.raises(Died):
            close_run(folder)
    assert list_runs(tmp_path)[0].delivery == ""
    assert recover_and_close(folder, utc_ns=7) is not None
    assert check_folder(folder).sound
    assert json.loads((folder.path / "result.json").read_text())["outcome"] == "finished"
    assert list_runs(tmp_path)[0].delivery == "due"
