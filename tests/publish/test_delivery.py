"""Handing results over: at least once, whole, repeated after a crash anywhere, by the bench file's word alone."""

import fcntl
import io
import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path
from typing import Any

import pandas as pd
import pytest

from hvhost.bench.archive import Archive
from hvhost.publish import delivery
from hvhost.publish.delivery import FAILURES, command_of, deliver_due, failure_of, main, next_try_ns, text_of
from hvhost.record.amend import amend
from hvhost.record.catalogue import list_runs
from hvhost.record.folder import RunFolder
from hvhost.record.manifest import check_folder, revisions_of, write_manifest
from hvhost.words.errors import RecordFault
from tests.record.making import OPENED_NS, made_meta

RESULT: dict[str, Any] = {"format": 1, "run": "0001", "order": "A-7", "specimen": "S-1", "opened_utc_ns": OPENED_NS,
                          "verdict": "pass", "outcome": "finished", "polarity": 1, "highest_v": 5e3, "breakdowns": []}


def made(root: Path, run: str = "0001", *, archive: bool = True, close: bool = True) -> RunFolder:
    """A closed run whose bench asks for its result to be handed over."""
    meta = made_meta(run=run, bench={"file": "b.yaml", "text": "", "archive": archive},
                     sheet={"specimen": "S-1", "order": "A-7"})
    folder = RunFolder.create(root, run, OPENED_NS, meta.to_json(), {})
    (folder.path / "result.json").write_text(json.dumps({**RESULT, "run": run}))
    if close:
        write_manifest(folder)
    return folder


def place(tmp_path: Path, **changes: Any) -> Archive:
    """The section, with its folder."""
    results = tmp_path / "results"
    results.mkdir(exist_ok=True)
    return Archive(**{"results": str(results), **changes})


def script(tmp_path: Path, text: str) -> tuple[str, ...]:
    """A command that runs this Python."""
    path = tmp_path / "command.py"
    path.write_text(text)
    return (sys.executable, str(path))


def test_a_closed_run_is_handed_over_once_and_leaves_a_revision(tmp_path: Path) -> None:
    """The file is whole under order, specimen and run; a second pass finds nothing due; the folder stays sound."""
    root = tmp_path / "runs"
    folder = made(root)
    made(root, "0002", archive=False)
    made(root, "0003", close=False)
    assert [run.delivery for run in list_runs(root)] == ["due", "", ""]
    outcome = deliver_due(root, place(tmp_path))
    assert (outcome.done, outcome.failed) == ([folder.name], {})
    (name,) = os.listdir(tmp_path / "results")
    assert name == f"A-7_S-1_{folder.name}.csv"
    row = pd.read_csv(tmp_path / "results" / name, dtype={"run": str}).iloc[0]
    assert (row["order"], row["specimen"], row["run"], row["revision"]) == ("A-7", "S-1", "0001", 0)
    (revision,) = revisions_of(folder)
    assert (revision["kind"], revision["data"]["revision"]) == ("delivered", 0)
    assert check_folder(folder).sound
    assert list_runs(root)[0].delivery == "delivered"
    assert deliver_due(root, place(tmp_path)).done == []


def test_a_correction_is_handed_over_again_under_a_higher_revision(tmp_path: Path) -> None:
    """The laboratory's files follow what was corrected; the run tells which row replaces which."""
    root = tmp_path / "runs"
    folder = made(root)
    deliver_due(root, place(tmp_path))
    amend(folder, {"order": "A-8"}, reason="misread", by="operator A", utc_ns=1)
    assert list_runs(root)[0].delivery == "due"
    assert deliver_due(root, place(tmp_path)).done == [folder.name]
    rows = [pd.read_csv(path).iloc[0] for path in sorted((tmp_path / "results").iterdir())]
    assert [(row["order"], row["revision"]) for row in rows] == [("A-7", 0), ("A-8", 2)]
    assert list_runs(root)[0].delivery == "delivered"


def test_the_command_gets_the_path_as_its_last_word_and_no_secret(tmp_path: Path,
                                                                  monkeypatch: pytest.MonkeyPatch) -> None:
    """No shell, no standard input, its own folder, and nothing of the daemon's environment but a few harmless names."""
    monkeypatch.setenv("BROKER_PASSWORD", "secret")
    root = tmp_path / "runs"
    made(root)
    words = (*script(tmp_path, "import json, os, sys\n"
                     f"open({str(tmp_path / 'seen')!r}, 'w').write(json.dumps([sys.argv[1:], dict(os.environ), "
                     "sys.stdin.read(), os.getcwd()]))"), "--from", "$HOME; rm")
    assert deliver_due(root, place(tmp_path, command=words)).failed == {}
    arguments, environment, given, where = json.loads((tmp_path / "seen").read_text())
    assert arguments[:2] == ["--from", "$HOME; rm"]
    assert Path(arguments[2]).is_file()
    assert "BROKER_PASSWORD" not in environment
    assert (given, where) == ("", str(tmp_path / "results"))


@pytest.mark.parametrize(("text", "said"), [
    ("import sys; print('no such order'); sys.exit(3)", "found 3; no such order"),
    ("import sys; sys.stdout.write('x' * 5_000_000 + chr(10) + 'last words' + chr(7)); sys.exit(1)", "last words?"),
    ("import time; time.sleep(60)", "within 1 s")])
def test_a_command_that_fails_leaves_the_run_due_and_is_listed(tmp_path: Path, text: str, said: str) -> None:
    """Its last line is kept, bounded; it is tried again after a pause that grows, at once where somebody asks."""
    root = tmp_path / "runs"
    folder = made(root)
    archive = place(tmp_path, command=script(tmp_path, text), command_limit_s=1.0)
    assert said in deliver_due(root, archive).failed[folder.name]
    assert list_runs(root)[0].delivery == "due"
    assert said in failure_of(root, folder.name)
    assert "tried 1 times" in failure_of(root, folder.name)
    first_ns = next_try_ns(root, folder.name)
    assert deliver_due(root, archive).waiting == 1
    if "sleep" not in text:
        deliver_due(root, archive, forced=True)
        assert next_try_ns(root, folder.name) - first_ns > 50_000_000_000
    assert deliver_due(root, place(tmp_path), forced=True).done == [folder.name]
    assert failure_of(root, folder.name) == ""


def test_a_command_that_is_not_there_and_a_folder_that_is_missing_are_sentences(tmp_path: Path) -> None:
    """The run stays due, the sentence names what to do."""
    root = tmp_path / "runs"
    folder = made(root)
    for archive, said in ((place(tmp_path, command=("/no/such/program",)), "a command that can be run"),
                          (Archive(results=str(tmp_path / "absent")), "make it, or change the bench file")):
        assert said in deliver_due(root, archive, forced=True).failed[folder.name]
    (folder.path / "result.json").unlink()
    assert "a result that can be read" in deliver_due(root, place(tmp_path), forced=True).failed[folder.name]


@pytest.mark.parametrize("step", ["write_synced", "_run_command", "append_revision"])
def test_a_crash_at_any_step_leaves_nothing_half_done_and_is_repeated(
        tmp_path: Path, monkeypatch: pytest.MonkeyPatch, step: str) -> None:
    """Dying before a step is as if nothing had been done: the same file comes again, whole, and then the revision."""
    root = tmp_path / "runs"
    folder = made(root)
    archive = place(tmp_path, command=script(tmp_path, f"open({str(tmp_path / 'seen')!r}, 'a').write('.')"))

    class Died(BaseException):
        pass

    def die(*_: object, **__: object) -> None:
        raise Died

    with monkeypatch.context() as patch:
        patch.setattr(delivery, step, die)
        with pytest.raises(Died):
            deliver_due(root, archive)
    assert list_runs(root)[0].delivery == "due"
    for path in (tmp_path / "results").iterdir():
        assert pd.read_csv(path).iloc[0]["specimen"] == "S-1"
    assert deliver_due(root, archive).done == [folder.name]
    assert len(os.listdir(tmp_path / "results")) == 1
    assert [r["kind"] for r in revisions_of(folder)] == ["delivered"]
    assert len((tmp_path / "seen").read_text()) == (2 if step == "append_revision" else 1)


def test_a_folder_from_elsewhere_moves_nothing_and_starts_nothing(tmp_path: Path) -> None:
    """Paths and commands in a record are never used: only the section of the bench file at hand is."""
    root = tmp_path / "runs"
    meta = made_meta(bench={"file": "b", "text": "", "archive": {"results": str(tmp_path), "command": ["/bin/false"]}},
                     sheet={"specimen": "../../x", "order": "/etc/passwd"})
    folder = RunFolder.create(root, "0001", OPENED_NS, meta.to_json(), {})
    (folder.path / "result.json").write_text(json.dumps({**RESULT, "order": "/etc/passwd", "specimen": "../../x"}))
    write_manifest(folder)
    assert deliver_due(root, place(tmp_path)).done == [folder.name]
    assert os.listdir(tmp_path / "results") == [f"etc-passwd_x_{folder.name}.csv"]


def test_of_two_processes_one_delivers(tmp_path: Path) -> None:
    """A second pass meanwhile does nothing, and says that nothing failed."""
    root = tmp_path / "runs"
    made(root)
    (root / FAILURES).mkdir()
    held = os.open(root / FAILURES, os.O_RDONLY)
    fcntl.flock(held, fcntl.LOCK_EX)
    outcome = deliver_due(root, place(tmp_path))
    os.close(held)
    assert (outcome.done, outcome.failed, outcome.waiting) == ([], {}, 0)


def test_a_runs_folder_that_cannot_be_written_is_a_sentence(tmp_path: Path) -> None:
    """Without a place for its lock nothing is delivered."""
    root = tmp_path / "runs"
    made(root)
    (root / FAILURES).write_text("a file")
    with pytest.raises(RecordFault, match="can be written"):
        deliver_due(root, place(tmp_path))


def test_damaged_notes_of_failures_are_no_failures(tmp_path: Path) -> None:
    """What is due is told by the run folders; a note that cannot be read hides nothing."""
    root = tmp_path / "runs"
    folder = made(root)
    (root / FAILURES).mkdir()
    (root / FAILURES / f"{folder.name}.json").write_text('{"attempts": "x"}')
    assert (failure_of(root, folder.name), next_try_ns(root, folder.name)) == ("", 0)
    assert deliver_due(root, place(tmp_path)).done == [folder.name]


def test_the_process_reads_the_section_and_prints_what_it_did(
        tmp_path: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch) -> None:
    """The daemon starts it with the runs folder and the section on standard input."""
    root = tmp_path / "runs"
    folder = made(root)
    archive = place(tmp_path)
    assert command_of(root)[1:] == ("-m", "hvhost.publish.delivery", str(root))
    monkeypatch.setattr(sys, "stdin", io.TextIOWrapper(io.BytesIO(text_of(archive))))
    monkeypatch.setattr(signal, "signal", lambda number, act: None)
    assert main([str(root)]) == 0
    assert json.loads(capsys.readouterr().out)["done"] == [folder.name]
    assert main([]) == 2


def test_a_process_that_is_told_to_end_takes_its_command_with_it(tmp_path: Path) -> None:
    """Nothing of a delivery is left behind when the daemon ends."""
    root = tmp_path / "runs"
    made(root)
    pid_file = tmp_path / "pid"
    archive = place(tmp_path, command=script(
        tmp_path, f"import os, time\nopen({str(pid_file)!r}, 'w').write(str(os.getpid()))\ntime.sleep(600)"))
    child = subprocess.Popen(command_of(root), stdin=subprocess.PIPE, stdout=subprocess.DEVNULL)
    assert child.stdin is not None
    child.stdin.write(text_of(archive))
    child.stdin.close()
    _until(lambda: pid_file.exists() and pid_file.read_text())
    child.terminate()
    assert child.wait(30.0) == 128 + signal.SIGTERM
    _until(lambda: not Path(f"/proc/{pid_file.read_text()}").exists())


def _until(condition: Any) -> None:
    until_s = time.monotonic() + 30.0
    while not condition():
        assert time.monotonic() < until_s
        time.sleep(0.02)
