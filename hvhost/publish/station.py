"""One bench with its core, its record and its picture, without any waiting: what the daemon and a rehearsal share.

The shell hands in bytes, the passing of time and requests; the station writes what the core yields at once, and only
then records and composes.  Closing a run (Parquet, measures, page, manifest) takes long, so it is handed out as a job.
"""

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any, Protocol

from hvhost.bench.model import Bench
from hvhost.publish.compose import Composer
from hvhost.publish.keeping import Keeping
from hvhost.publish.machine import Machine
from hvhost.publish.requests import Requests
from hvhost.publish.snapshot import DiskView, RecordView, Snapshot
from hvhost.record.entries import AnchorEntry, CommandEntry, GarbledEntry, LineEntry, NoteEntry, SentEntry, TimerEntry
from hvhost.record.folder import RunFolder
from hvhost.record.opening import Opened
from hvhost.record.recorder import Recording
from hvhost.supervisor.core import Core
from hvhost.supervisor.journal import NoJournal
from hvhost.supervisor.runs import ActiveRun, Outcome, Stage
from hvhost.wire.frames import Block
from hvhost.words.clocks import Clock
from hvhost.words.errors import HvhostError

ANCHOR_S = 1.0  # the wall clock is compared with the tick clock this often while a run is open
CLOSED = Stage.CLOSED
LF = 0x0A
LINES = re.compile(rb"\n?[^\n]+\n?")


class Openers(Protocol):
    """How a run's folder and recorder are made (on disk with a thread, or inline under a virtual clock)."""

    def __call__(self, folder: RunFolder, meta: Mapping[str, Any], *, tag: int, signs: str,
                 on_failed: Callable[[str], None]) -> Recording:
        """Open the recorder or raise `RecordFault`."""
        ...


class RunJournal:
    """Passes the core's journal on to a recorder."""

    def __init__(self, recording: Recording, utc_of: Callable[[float], int]) -> None:
        self.recording, self._utc_of = recording, utc_of
        self.block: Callable[[float, Block], None] = recording.put_block

    def line(self, now_s: float, body: bytes) -> None:
        """Any other line."""
        self.recording.put(LineEntry(now_s, body))

    def garbled(self, now_s: float, reason: str, size: int) -> None:
        """A dropped line."""
        self.recording.put(GarbledEntry(now_s, reason, size))

    def sent(self, now_s: float, data: bytes) -> None:
        """Bytes handed to the port, a line at a time."""
        if data[0] != LF and data.find(b"\n") == len(data) - 1:  # one line, as nearly always
            self.recording.put(SentEntry(now_s, data))
            return
        for line in LINES.findall(data):
            self.recording.put(SentEntry(now_s, line))

    def command(self, now_s: float, data: Mapping[str, Any]) -> None:
        """A command taken; a ticket proves control and is a secret."""
        kept = {**data, "args": {key: value for key, value in data["args"].items() if key != "ticket"}}
        self.recording.put(CommandEntry(now_s, kept))

    def timer(self, now_s: float) -> None:
        """A step by time alone."""
        self.recording.put(TimerEntry(now_s))

    def note(self, now_s: float, data: Mapping[str, Any]) -> None:
        """A conclusion."""
        utc_ns = self._utc_of(now_s)
        self.recording.put(NoteEntry(utc_ns, {**data, "utc_ns": utc_ns}))


@dataclass(frozen=True, slots=True, kw_only=True)
class CloseJob:
    """A run whose record is to be closed, away from the loop's thread."""

    folder: RunFolder
    recording: Recording
    run: ActiveRun


def end_recording(job: CloseJob) -> None:
    """Write the END entry and let go of the block file; waits for the disk."""
    run = job.run
    job.recording.close(run.outcome or Outcome.INTERRUPTED, why=run.why, causes=run.causes, host_rule=run.host_rule,
                        arcs=run.arcs)


class Station:
    """See the module's text.  ``write`` takes bytes and returns what the port did not accept."""

    def __init__(self, bench: Bench, clock: Clock, sessions: Callable[[], int], *, runs_root: Path, openers: Openers,
                 write: Callable[[bytes], bytes], on_close: Callable[[CloseJob], None], port: str,
                 rehearsal: bool = False) -> None:
        self.clock, self.runs_root, self.openers, self.rehearsal = clock, runs_root, openers, rehearsal
        self.core = Core(bench, clock.now_s(), sessions)
        self.machine = Machine(bench, runs_root, rehearsal=rehearsal)
        self.composer = Composer(self.core, self.utc_of, port=port, rehearsal=rehearsal)
        self.requests = Requests(self)
        self.keeping = Keeping(self)
        self.folder: RunFolder | None = None
        self.recording: Recording | None = None
        self.closing = 0
        self.settled = True  # False while earlier runs are being recovered: their evidence waits
        self.failed = ""
        self._write, self._on_close = write, on_close
        self._journal: RunJournal | None = None
        self._anchor_due_s = 0.0

    def utc_of(self, now_s: float) -> int:
        """UTC nanoseconds of a monotonic time, by the wall clock as it is now."""
        return self.clock.utc_ns() - round((self.clock.now_s() - now_s) * 1e9)

    # ------------------------------------------------------------ bytes and time

    def connect(self) -> None:
        """The port is open: greet."""
        self.put(self.core.connect(self.clock.now_s()))

    def gone(self, reason: str) -> None:
        """The port is gone."""
        self.core.port_gone(self.clock.now_s(), reason)
        self.after()

    def feed(self, data: bytes) -> None:
        """Bytes arrived: judge, write, and only then everything else."""
        for piece in self.core.receive(data, self.clock.now_s()):
            self.put(piece)
        self.composer.look()
        self.after()

    def tick(self) -> None:
        """Time passed."""
        self.put(self.core.timer(self.clock.now_s()))
        self.after()

    def flush(self) -> None:
        """The port has room again, or a command was taken."""
        self.put(self.core.take_output(self.clock.now_s()))

    def put(self, data: bytes) -> None:
        """Write bytes; hand back to the link what the port did not take."""
        if data:
            rest = self._write(data)
            if rest and self.core.link is not None:
                self.core.link.unsent(rest)

    def deadline(self) -> float | None:
        """When `tick` is next needed."""
        return self.core.deadline(self.clock.now_s())

    # ------------------------------------------------------------ requests

    def handle(self, method: str, params: Mapping[str, Any], who: str) -> dict[str, Any]:
        """Carry out one request; raises `HvhostError`; stops are on the wire when this returns."""
        try:
            return self.requests.handle(method, params, who)
        except HvhostError as refused:
            self.core.note(self.clock.now_s(), "refused", method=method[:60], who=who, text=str(refused)[:500])
            raise
        finally:
            self.flush()
            self.after()

    def command(self, name: str, args: Mapping[str, Any], who: str) -> dict[str, Any]:
        """Hand one command to the core and write what it causes."""
        result = self.core.command(self.clock.now_s(), name, args, who)
        self.flush()
        return result

    def snapshot(self, outlets: tuple[Any, ...] = ()) -> Snapshot:
        """The picture now."""
        self._record_view()
        return replace(self.composer.snapshot(self.clock.now_s(), outlets),
                       loop=self.machine.loop_view(self.clock.now_s()), disk=self.machine.disk)

    # ------------------------------------------------------------ the record

    def begin_record(self, opened: Opened) -> None:
        """A run was prepared: from here every input of the core is recorded."""
        self.folder, self.recording = opened.folder, opened.recording
        self.composer.folder = str(opened.folder.path)
        self.composer.verdict_text = ""
        self.composer.clear_trend()
        self._journal = RunJournal(opened.recording, self.utc_of)
        self.core.journal = self._journal
        self.machine.gauge.run_opened()
        self._anchor_due_s = 0.0
        self._anchor()

    def record_failed(self, reason: str) -> None:
        """The recorder cannot go on: the second table lowers whatever runs."""
        self.failed = reason
        self.core.recorder_failed(self.clock.now_s())
        self.flush()

    def look_at_machine(self, disk: DiskView) -> None:
        """What was found of the disk, a moment ago and by another thread; what runs on too little room is lowered."""
        machine = self.machine
        machine.disk = disk
        if not disk.ok and self.recording is not None and not self.failed:
            self.core.say(self.clock.now_s(), "attention", machine.disk_text)
            self.record_failed(machine.disk_text)
            self.after()
        if warning := machine.warning():
            self.core.say(self.clock.now_s(), "attention", warning)

    def after(self) -> None:
        """What follows every step: anchors, evidence, and the close of a run that is over."""
        if self._journal is not None and self.clock.now_s() >= self._anchor_due_s:
            self._anchor()
        if self.settled:
            self.keeping.step(self.clock.now_s())
        run = self.core.run
        if run is not None and run.stage is CLOSED and self.recording is not None and self.folder is not None:
            machine = self.machine.note()
            if machine["loop"]["beats"]:  # under a virtual clock no loop runs, and equal runs give equal bytes
                self.core.note(self.clock.now_s(), "machine", **machine)
            job = CloseJob(folder=self.folder, recording=self.recording, run=run)
            self.core.journal, self._journal, self.recording = NoJournal(), None, None
            self.closing += 1
            self._on_close(job)

    def closed(self, verdict_text: str) -> None:
        """The job is done."""
        self.closing -= 1
        self.composer.verdict_text = verdict_text
        if not self.recording:
            self.failed = ""
            self.core.recorder_ready = True

    def _anchor(self) -> None:
        self._anchor_due_s = self.clock.now_s() + ANCHOR_S
        assembler = self.core.assembler
        if assembler is None or self._journal is None:
            return
        anchor = assembler.clock.anchor_at(self.clock.now_s(), self.clock.utc_ns()) or assembler.clock.anchor
        if anchor is not None:
            self._journal.recording.put(AnchorEntry(anchor.tick, anchor.mono_s, anchor.utc_ns))

    def _record_view(self) -> None:
        if self.recording is None:
            self.composer.record = RecordView(ok=not self.failed, text=self.failed or "no run open")
            return
        health = self.recording.health()
        failed = health.failed or self.failed
        self.composer.record = RecordView(
            ok=not failed, text=failed or f"{health.written_bytes / 1024:.0f} KiB, {health.queued} waiting")
