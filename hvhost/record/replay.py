"""Puts a record back through the same core and compares what it judged and sent with what the record says.

The core is made as it stood when the run was opened (META), then given every recorded input in order.  Its verdicts
and the lines that it sends must come again at the same samples; the first place where they part is told.
"""

from collections.abc import Iterator, Mapping
from contextlib import suppress
from dataclasses import dataclass, field
from typing import Any

from hvhost.bench.file import bench_from
from hvhost.plan.compiler import direct_program
from hvhost.plan.language import read_plan
from hvhost.plan.passing import History
from hvhost.plan.preflight import preflight
from hvhost.plan.program import Program
from hvhost.plan.sheet import sheet_from
from hvhost.record.blockfile import read_blocks
from hvhost.record.entries import (
    BlockEntry,
    CommandEntry,
    Damage,
    Entry,
    LineEntry,
    MetaEntry,
    NoteEntry,
    SentEntry,
    TimerEntry,
)
from hvhost.record.folder import RunFolder
from hvhost.record.meta import RunMeta
from hvhost.supervisor.arming import interfering
from hvhost.supervisor.commands import open_run
from hvhost.supervisor.core import Core
from hvhost.supervisor.runs import RunSpec
from hvhost.supervisor.seat import Holder, Seat
from hvhost.wire.frames import Block, encode_block
from hvhost.wire.greeting import Greeting, McuInfo
from hvhost.wire.lines import seal
from hvhost.wire.link import Link
from hvhost.wire.settings import Settings
from hvhost.wire.vocabulary import ResetCause
from hvhost.words.errors import CommandRefused, RecordFault

VERDICT_KEYS = ("rule", "severity", "limit", "measured", "index", "tick")
Told = tuple[str, Any]


@dataclass(slots=True, kw_only=True)
class Replayed:
    """What a replay found: counts, the first parting as text ('' where none), interfering samples by rule."""

    inputs: int = 0
    blocks: int = 0
    pairs: int = 0
    verdicts: int = 0
    parted: str = ""
    damage: int = 0
    interfering: Mapping[str, int] = field(default_factory=dict)
    interfering_recorded: Mapping[str, int] | None = None  # as the run's close noted it; None where nothing closed it


class Memory:
    """The journal of a replayed core: keeps verdicts and lines sent."""

    def __init__(self) -> None:
        self.told: list[Told] = []

    def block(self, now_s: float, block: Block) -> None:
        """An input; nothing to compare."""

    def line(self, now_s: float, body: bytes) -> None:
        """An input; nothing to compare."""

    def garbled(self, now_s: float, reason: str, size: int) -> None:
        """An input; nothing to compare."""

    def sent(self, now_s: float, data: bytes) -> None:
        """Lines sent, without the LF that begins a stop."""
        self.told += [("sent", line) for line in data.split(b"\n") if line]

    def command(self, now_s: float, data: Mapping[str, Any]) -> None:
        """An input; nothing to compare."""

    def timer(self, now_s: float) -> None:
        """An input; nothing to compare."""

    def note(self, now_s: float, data: Mapping[str, Any]) -> None:
        """A conclusion; verdicts are compared."""
        if data["what"] == "verdict":
            self.told.append(("verdict", tuple(data[key] for key in VERDICT_KEYS)))


HOLDER = "then"  # stands for the ticket of whoever had control: a record keeps none


class RecordedSeat(Seat):
    """Control as the record tells it: of each command whether its sender had it."""

    def take(self, name: str, ticket: str, now_s: float, *, reason: str = "") -> str:
        """Take it under the one ticket that stands for all."""
        before = super().take(name, ticket, now_s, reason=reason)
        self.holder = Holder(name=name, ticket=HOLDER)
        return before


def replay(folder: RunFolder) -> Replayed:
    """Replay one run; raises `RecordFault` where it cannot begin."""
    entries = read_blocks(folder.blocks)
    first = next((e for e in entries if isinstance(e, Entry)), None)
    if first is None or not isinstance(first.content, MetaEntry):
        raise RecordFault("a META entry first", "none", str(folder.blocks))
    meta = RunMeta.of(first.content.data)
    memory = Memory()
    try:
        core = core_of(meta)
    except (KeyError, TypeError, ValueError) as error:
        raise RecordFault("a META entry of this version", f"{type(error).__name__}: {error}", str(folder.blocks),
                          "replay with the version that made the record") from None
    core.journal = memory
    return compare(core, meta.signs, memory, entries)


def compare(core: Core, signs: str, memory: Memory, entries: Iterator[Entry | Damage]) -> Replayed:
    """Feed every input; keep the record's own verdicts and sent lines, and hold both against each other."""
    found = Replayed()
    expected: list[Told] = []
    for inputs in _reads(entries, expected, found):
        feed(core, inputs[0], _lines(inputs, signs, found))
        found.inputs += len(inputs)
        found.parted = _parting(memory.told, expected, found)
        if found.parted:
            break
    if not found.parted:
        found.parted = _parting(memory.told, expected, found, at_end=True)
    found.verdicts = sum(kind == "verdict" for kind, _ in memory.told)
    found.interfering = interfering(core)
    return found


Input = BlockEntry | LineEntry | TimerEntry | CommandEntry


def _reads(entries: Iterator[Entry | Damage], expected: list[Told], found: Replayed) -> Iterator[list[Input]]:
    """Yield the recorded inputs as the core was given them: the lines of one read together, anything else alone.

    What the record says was judged and sent is put into ``expected`` on the way.
    """
    read: list[Input] = []
    for entry in entries:
        if isinstance(entry, Damage):
            found.damage += 1
            continue
        content = entry.content
        if isinstance(content, BlockEntry | LineEntry):
            before = read[0] if read else None
            if before is not None and isinstance(before, BlockEntry | LineEntry) \
                    and before.arrival_s != content.arrival_s:
                yield read
                read = []
            read.append(content)
        elif isinstance(content, TimerEntry | CommandEntry):
            if read:
                yield read
                read = []
            yield [content]
        elif isinstance(content, SentEntry):
            expected += [("sent", line) for line in content.line.split(b"\n") if line]
        elif isinstance(content, NoteEntry):
            _noted(content, expected, found)
    if read:
        yield read


def _noted(content: NoteEntry, expected: list[Told], found: Replayed) -> None:
    what = content.data.get("what")
    if what == "verdict":
        expected.append(("verdict", tuple(content.data[key] for key in VERDICT_KEYS)))
    elif what == "run closed":
        found.interfering_recorded = dict(content.data.get("interfering", {}))


def feed(core: Core, content: Input, lines: bytes) -> None:
    """Give one input to the core: the lines of a read, a command, or the passing of time."""
    if isinstance(content, BlockEntry | LineEntry):
        for _ in core.receive(lines, content.arrival_s):
            pass
    elif isinstance(content, TimerEntry):
        core.timer(content.t_s)
    else:
        data = content.data
        ticket = HOLDER if data.get("control", True) else ""
        with suppress(CommandRefused):
            core.command(content.t_s, str(data["name"]), {**data["args"], "ticket": ticket}, str(data["who"]))
            core.take_output(content.t_s)


def _lines(read: list[Input], signs: str, found: Replayed) -> bytes:
    """The lines of one read as they came over the wire."""
    lines = b""
    for content in read:
        if isinstance(content, BlockEntry):
            found.blocks += 1
            found.pairs += content.block.pairs
            lines += seal(encode_block(content.block, signs))
        elif isinstance(content, LineEntry):
            lines += seal(content.body)
    return lines


def _parting(told: list[Told], expected: list[Told], found: Replayed, *, at_end: bool = False) -> str:
    """The first difference, or '' while one list is the beginning of the other."""
    both = min(len(told), len(expected))
    for at in range(found.verdicts, both):
        if told[at] != expected[at]:
            return (f"after {found.pairs} pairs: the record has {_words(expected[at])}, the replay {_words(told[at])}"
                    + _judged(told[at:], expected[at:]))
    found.verdicts = both
    if at_end and len(told) != len(expected):
        if len(told) > both:
            return f"after {found.pairs} pairs: the replay has {_words(told[both])}, the record nothing more"
        return f"after {found.pairs} pairs: the record has {_words(expected[both])}, the replay nothing more"
    return ""


def _judged(told: list[Told], expected: list[Told]) -> str:
    """The verdict behind a line that parts, where only one side has one."""
    mine = next((t for t in told if t[0] == "verdict"), None)
    theirs = next((t for t in expected if t[0] == "verdict"), None)
    if mine == theirs:
        return ""
    return "".join(f"; {side}: {_words(one)}" for side, one in (("replay", mine), ("record", theirs)) if one)


def _words(told: Told) -> str:
    kind, value = told
    if kind == "sent":
        return f"sent {value.decode('ascii', 'replace')}"
    rule, severity, limit, measured, index, _ = value
    return f"verdict {rule} ({severity}) at sample {index}: {measured} against {limit}"


def core_of(meta: RunMeta) -> Core:
    """The core as it stood when the run was opened."""
    bench = bench_from(str(meta.bench["file"]), str(meta.bench["text"]))
    core = Core(bench, meta.opened_mono_s, lambda: 1)
    info = {key: meta.greeting[key] for key in McuInfo.__slots__}
    info["reset"] = ResetCause(info["reset"])
    greeting = Greeting(session=int(meta.greeting["session"]), lease_s=float(meta.greeting["lease_s"]),
                        info=McuInfo(**info), settings=Settings(tuple(meta.settings)) if meta.settings else None)
    core.resume(greeting, meta.supervisor_state, meta.opened_mono_s,
                Link.resumed(meta.opened_mono_s, greeting, meta.supervisor_state["link"]))
    core.seat = RecordedSeat()
    if meta.supervisor_state.get("seat_held"):
        core.seat.take(HOLDER, HOLDER, meta.opened_mono_s)
    open_run(core, RunSpec(run_id=meta.run, kind="direct" if meta.plan is None else "plan",
                           plan=str((meta.plan or {}).get("title", "direct run")),
                           specimen=str((meta.sheet or {}).get("specimen", "")), operator=meta.operator, tag=meta.tag,
                           program=_program(meta, core), digest=""), meta.opened_mono_s)
    return core


def _program(meta: RunMeta, core: Core) -> Program:
    if meta.plan is None:
        return direct_program(core.bench)
    plan, _ = read_plan(str(meta.plan["file"]), str(meta.plan["text"]))
    sheet = sheet_from(str((meta.sheet or {})["file"]), str((meta.sheet or {})["text"]))
    if plan is None:
        raise RecordFault("the plan that was run", "one that is refused now", "META entry",
                          "replay with the version that made the record")
    assert core.greeting is not None
    checked = preflight(plan, sheet, core.bench, history=History(), tick_hz=core.greeting.info.tick_hz,
                        queue=core.greeting.info.queue)
    if checked.program is None:
        raise RecordFault("the plan that was run", "one that preflight refuses now", "META entry",
                          "replay with the version that made the record")
    return checked.program
