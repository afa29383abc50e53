"""Hands the results of closed runs over: ``python -m hvhost.publish.delivery ROOT`` (a process of its own).

Theory.  Which results are due is told by the run folders alone: the bench asked for them when the run was opened, the
run is closed, and no revision ``delivered`` stands behind its last correction.  Delivering one run is: its CSV file
written whole beside its place and renamed into it; the command, if there is one, run with that path; the revision
``delivered``.  A crash anywhere leaves the run due and everything is done again, to the same file: each result is
handed over at least once, and a command may see a file twice.

Where to and by what is the bench file's word alone, never a record's: a run folder from elsewhere moves nothing and
starts nothing.  Failures are kept in ``.undelivered`` under the runs folder and tried again after growing pauses.
"""

import contextlib
import fcntl
import json
import os
import signal
import subprocess
import sys
import threading
import time
from collections.abc import Iterator
from dataclasses import asdict, dataclass, field
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from hvhost.bench.archive import Archive
from hvhost.record.amend import alone
from hvhost.record.catalogue import DELIVERED, RunSummary, list_runs
from hvhost.record.csvform import CsvForm
from hvhost.record.folder import RESULT, RunFolder, folder_fault, write_synced
from hvhost.record.manifest import append_revision, file_hash, revisions_of
from hvhost.report.resultfile import corrected_document
from hvhost.report.row import file_name, results_csv
from hvhost.words.errors import HvhostError, RecordFault

FAILURES = ".undelivered"
PAUSE_S, PAUSE_MOST_S = 60.0, 3600.0  # before the second try; it doubles up to the second
SAID_MAX = 2_000  # bytes kept of what a command said
TERM_S = 5.0  # a command that is told to end has this long
KEPT_ENVIRONMENT = ("PATH", "HOME", "LANG", "LC_ALL", "TZ", "USER", "LOGNAME")  # nothing that could be a secret


@dataclass(slots=True, kw_only=True)
class Delivered:
    """What one pass did: run folders handed over, those that failed with their sentence, those not tried yet again."""

    done: list[str] = field(default_factory=list)
    failed: dict[str, str] = field(default_factory=dict)
    waiting: int = 0


def deliver_due(root: Path, archive: Archive, *, forced: bool = False) -> Delivered:
    """Hand over every result that is due and whose pause is over (all with ``forced``); oldest first.

    A second process that comes meanwhile does nothing.  Raises `RecordFault` where the runs folder cannot be written.
    """
    outcome = Delivered()
    due = [run for run in list_runs(root) if run.delivery == "due"]
    if not due:
        return outcome
    with _one_at_a_time(root) as mine:
        for run in due if mine else ():
            if not forced and next_try_ns(root, run.path.name) > time.time_ns():
                outcome.waiting += 1
                continue
            try:
                deliver(run, archive)
            except (HvhostError, OSError) as error:
                outcome.failed[run.path.name] = str(error)
                _note_failure(root, run.path.name, str(error))
            else:
                outcome.done.append(run.path.name)
                _failure_file(root, run.path.name).unlink(missing_ok=True)
    return outcome


def deliver(run: RunSummary, archive: Archive) -> Path:
    """Hand over one result; returns its file.  Raises `RecordFault` where that failed; the run stays due then."""
    folder = RunFolder(run.path)
    revisions = revisions_of(folder)
    document = corrected_document(_result_of(folder), revisions)
    form = CsvForm(decimal=archive.decimal, separator=archive.separator, zone=archive.zone)
    place = Path(archive.results)
    path = place / file_name(document, folder.name)
    data = results_csv(document, form)
    try:
        if not place.is_dir():
            raise RecordFault("a folder for results", "none", str(place), "make it, or change the bench file's archive")
        if not path.exists() or path.read_bytes() != data:
            write_synced(path, data)
    except OSError as error:
        raise folder_fault(error, path) from None
    if archive.command:
        _run_command((*archive.command, str(path)), archive.command_limit_s, place)
    count = sum(revision.get("kind") == DELIVERED for revision in revisions)
    with alone(folder):
        append_revision(folder, DELIVERED, {"delivery": count + 1, "file": str(path), "sha256": file_hash(path),
                                            "revision": document["revision"], "command": list(archive.command)},
                        utc_ns=time.time_ns())
    return path


def _result_of(folder: RunFolder) -> dict[str, Any]:
    try:
        document = json.loads((folder.path / RESULT).read_bytes())
    except (OSError, ValueError):
        document = None
    if not isinstance(document, dict):
        raise RecordFault("a result that can be read", "none", str(folder.path / RESULT))
    return document


# ---------------------------------------------------------------- the command


def _run_command(words: tuple[str, ...], limit_s: float, place: Path) -> None:
    """Run the command to its end, at most ``limit_s``; raises `RecordFault` with its last words."""
    environment = {name: os.environ[name] for name in KEPT_ENVIRONMENT if name in os.environ}
    try:
        child = subprocess.Popen(words, stdin=subprocess.DEVNULL, stdout=subprocess.PIPE, stderr=subprocess.STDOUT,
                                 cwd=place, env=environment, start_new_session=True)
    except OSError as error:
        raise RecordFault("a command that can be run", error.strerror or str(error), words[0]) from None
    tail = _Tail(child)
    try:
        code = child.wait(limit_s)
    except subprocess.TimeoutExpired:
        _end_group(child)
        raise RecordFault(f"the command to end within {limit_s:g} s", "it did not", words[0], tail.text) from None
    except BaseException:  # this process is told to end: nothing of it stays behind
        _end_group(child)
        raise
    said = tail.text
    if code:
        raise RecordFault("the command to end with code 0", str(code), words[0], said)


class _Tail:
    """Reads all that a child says and keeps the last of it, in bounded memory."""

    def __init__(self, child: "subprocess.Popen[bytes]") -> None:
        self._kept = b""
        self._pipe = child.stdout
        self._thread = threading.Thread(target=self._read, daemon=True)
        self._thread.start()

    def _read(self) -> None:
        if self._pipe is None:
            return
        with contextlib.suppress(OSError), self._pipe as pipe:
            while data := os.read(pipe.fileno(), 65_536):
                self._kept = (self._kept + data)[-SAID_MAX:]

    @property
    def text(self) -> str:
        """The last line, printable; to be asked once the command has ended."""
        self._thread.join(1.0)  # a grandchild may hold the pipe open
        lines = self._kept.decode("utf-8", "replace").strip().splitlines()
        return "".join(c if c.isprintable() else "?" for c in lines[-1])[:200] if lines else ""


def _end_group(child: "subprocess.Popen[bytes]") -> None:
    """End whatever is left of a command, gently first."""
    for number, patience_s in ((signal.SIGTERM, TERM_S), (signal.SIGKILL, TERM_S)):
        with contextlib.suppress(ProcessLookupError, PermissionError):
            os.killpg(child.pid, number)
        with contextlib.suppress(subprocess.TimeoutExpired):
            child.wait(patience_s)
            break


# ---------------------------------------------------------------- failures


def failure_of(root: Path, name: str) -> str:
    """Say how often and why a run's delivery failed and when it is tried again; '' where it did not."""
    found = _failure(root, name)
    if not found:
        return ""
    again = datetime.fromtimestamp(int(found["next_utc_ns"]) // 1_000_000_000, UTC).strftime("%Y-%m-%d %H:%M:%S UTC")
    return f"tried {found['attempts']} times: {found['text']}; again after {again}"


def next_try_ns(root: Path, name: str) -> int:
    """UTC in nanoseconds before which a failed delivery is not tried again; 0 where none failed."""
    return int(_failure(root, name).get("next_utc_ns", 0))


def _failure_file(root: Path, name: str) -> Path:
    return root / FAILURES / f"{name}.json"


def _failure(root: Path, name: str) -> dict[str, Any]:
    try:
        data = json.loads(_failure_file(root, name).read_bytes())
        return {"attempts": int(data["attempts"]), "text": str(data["text"]), "next_utc_ns": int(data["next_utc_ns"])}
    except (OSError, ValueError, KeyError, TypeError):
        return {}


def _note_failure(root: Path, name: str, text: str) -> None:
    attempts = int(_failure(root, name).get("attempts", 0)) + 1
    pause_s = min(PAUSE_MOST_S, PAUSE_S * 2.0 ** min(attempts - 1, 16))
    now_ns = time.time_ns()
    data = {"attempts": attempts, "text": text[:1_000], "utc_ns": now_ns, "next_utc_ns": now_ns + round(pause_s * 1e9)}
    write_synced(_failure_file(root, name), json.dumps(data).encode("ascii"))


@contextlib.contextmanager
def _one_at_a_time(root: Path) -> Iterator[bool]:
    """Yield whether this process is the one that delivers."""
    place = root / FAILURES
    try:
        place.mkdir(exist_ok=True)
        descriptor = os.open(place, os.O_RDONLY | os.O_DIRECTORY | os.O_CLOEXEC)
    except OSError as error:
        raise folder_fault(error, place) from None
    try:
        try:
            fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            yield False
        else:
            yield True
    finally:
        os.close(descriptor)


# ---------------------------------------------------------------- the process


def command_of(root: Path) -> tuple[str, ...]:
    """Return the command line of the process; the bench file's section goes to its standard input (`text_of`)."""
    return (sys.executable, "-m", "hvhost.publish.delivery", str(root))


def text_of(archive: Archive) -> bytes:
    """The section as the process reads it."""
    return json.dumps(asdict(archive)).encode("ascii")


def main(arguments: list[str]) -> int:
    """Deliver what is due once; prints what was done as JSON; code 7 where anything failed."""
    if len(arguments) != 1:
        print("usage: python -m hvhost.publish.delivery ROOT <SECTION", file=sys.stderr)
        return 2
    signal.signal(signal.SIGTERM, _leave)
    section = json.loads(sys.stdin.buffer.read(65_536))
    archive = Archive(**{**section, "command": tuple(section["command"])})
    try:
        outcome = deliver_due(Path(arguments[0]), archive)
    except HvhostError as error:
        print(error, file=sys.stderr)
        return error.exit_code
    print(json.dumps(asdict(outcome)))
    return 7 if outcome.failed else 0


def _leave(number: int, frame: object) -> None:
    raise SystemExit(128 + number)


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
