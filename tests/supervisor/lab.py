"""A bench in memory for scenarios that read like lab notes: plant, MCU, wire, station, and the plant's own truth.

Time is virtual and goes by samples of 1 ms.  What really happened is judged by the truth records of the stand-in,
which shares no code with the host.  The bench is the demonstration bench with a shorter bleed time.
"""

import json
import random
from base64 import b64encode
from collections.abc import Callable
from dataclasses import replace
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from hvhost.bench.file import bench_from
from hvhost.bench.model import Bench
from hvhost.cli.plantof import plant_of
from hvhost.publish.compose import latched_words
from hvhost.publish.snapshot import Snapshot
from hvhost.publish.station import CloseJob, Station, end_recording
from hvhost.record.recorder import InlineRecorder
from hvhost.standin.bench import StandIn, config_of
from hvhost.standin.eeprom import Eeprom
from hvhost.standin.params import PROFILES, PlantParams, changed
from hvhost.standin.truth import TruthLog
from hvhost.supervisor.core import Core
from hvhost.supervisor.runs import ActiveRun, Outcome, Stage
from hvhost.supervisor.states import LIVE, LinkState, Permission
from hvhost.wire.frames import Block, decode_block, encode_block
from hvhost.wire.lines import seal
from hvhost.wire.settings import Settings
from hvhost.words.clocks import VirtualClock

CONFIGS = Path(__file__).parents[2] / "configs"
DAY = datetime(2026, 3, 2, tzinfo=UTC)
SHORT_BLEED = (
    ("  time: 2 s   ", "  time: 400 ms   "), ("  times: 8\n", "  times: 6\n"),
    ("  resistance: 500 MΩ\n", "  resistance: 100 MΩ\n"), ("  rest: 500 ms\n", "  rest: 300 ms\n"))
HOLD = """\
  - ramp: {to: 4 kV, rate: 4 kV/s}
  - hold: {name: level, for: 2 s, at_most: 8 s, window: 200 ms, readings: [1 s]}
"""
PAUSE = """\
specimen: self-restoring
arc: {reaction: pause, count: 10, rest: 500 ms, window: 60 s}
retreat: {rest: 500 ms, back: 50 %, climb: 4 kV/s, series: 3}
"""
SHEET = """\
sheet: On the stand-in
specimen: {specimen}
order: none
operator: somebody
environment: {{temperature: 22 °C, humidity: 41 %, pressure: 100.8 kPa}}
connected:
  capacitance: {{from: 100 pF, to: 2 nF}}
confirmed: {{polarity: {polarity}, grounded_while_connecting: yes, ground_removed: yes, area_clear: yes}}
"""
ME, OTHER = "me", "other"


def bench_of(name: str = "demo", changes: tuple[tuple[str, str], ...] = SHORT_BLEED) -> Bench:
    """An example bench with changes in its text."""
    text = (CONFIGS / f"{name}.bench.yaml").read_text(encoding="utf-8")
    for old, new in changes:
        assert old in text, old
        text = text.replace(old, new)
    return bench_from(f"{name}.bench.yaml", text)


DEMO = bench_of()
SMALL = bench_of("small", ())


def plan_of(steps: str = HOLD, extra: str = "", criterion: str = "criterion: no breakdown") -> str:
    """A plan file."""
    return (f"plan: Scenario\nreleased: {{by: laboratory lead, on: 2026-01-12}}\ncurrent_limit: 2 mA\n{extra}"
            f"steps:\n{steps}acceptance:\n  - {{{criterion}}}\n")


def _text(text: str) -> str:
    return b64encode(text.encode("utf-8")).decode("ascii")


class Lab:
    """One bench and its host."""

    def __init__(self, folder: Path, *, bench: Bench = DEMO, plant: PlantParams | None = None, profile: str = "demo",
                 changes: tuple[str, ...] = (), faults: tuple[str, ...] = (), settings: Settings | None = None,
                 blank: bool = False, seed: int = 7) -> None:
        self.bench = bench
        params = changed(plant or plant_of(bench, PROFILES[profile]()), list(changes))
        self.truth: list[dict[str, Any]] = []
        log = TruthLog(lambda line: self.truth.append(json.loads(line)), tick_hz=10_000)
        log.start(seed=seed, profile=profile, tick_hz=10_000)
        eeprom = Eeprom(None if blank else settings or bench.settings())
        self.board = StandIn(params, seed, eeprom=eeprom, config=config_of(params), faults=faults, truth=log)
        self.clock = VirtualClock(utc_origin_ns=int(DAY.timestamp()) * 1_000_000_000)
        self.runs = folder / "runs"
        self.sent: list[tuple[float, bytes]] = []  # what the host put on the wire, by virtual time
        self.tap: Callable[[bytes], bytes] = lambda line: line  # what comes between the MCU and the host
        self.jobs: list[CloseJob] = []
        self._recordings: list[InlineRecorder] = []
        self._to_board = bytearray()
        self._plugged = self._awake = True
        self._held = bytearray()
        self._tick = 0
        self.restart_host()

    def restart_host(self) -> None:
        """A new daemon on the same bench, knowing nothing."""
        rng = random.Random(len(self.sent) + 11)
        self.station = Station(self.bench, self.clock, lambda: rng.randrange(1, 1 << 32), runs_root=self.runs,
                               openers=self._open, write=self._write, on_close=self._close, port="memory",
                               rehearsal=True)
        self.station.requests.tag = lambda: rng.randrange(1, 1 << 32)

    def end(self) -> None:
        """Let go of the record of a run that is still open."""
        for recording in self._recordings:
            recording.close(Outcome.INTERRUPTED)

    def _open(self, *args: Any, **options: Any) -> InlineRecorder:
        recording = InlineRecorder.open(*args, **options)
        self._recordings.append(recording)
        return recording

    # ------------------------------------------------------------ time and wire

    @property
    def now_s(self) -> float:
        """Virtual seconds since the beginning."""
        return self.clock.now_s()

    def _write(self, data: bytes) -> bytes:
        self.sent.append((self.now_s, data))
        if self._plugged:
            self._to_board += data
        return b""

    def _close(self, job: CloseJob) -> None:
        end_recording(job)
        self._recordings.remove(job.recording)  # type: ignore[arg-type]
        self.jobs.append(job)
        self.station.closed("not measured here")

    def step(self) -> None:
        """One sample of the bench, and what the host makes of it."""
        data, self._to_board = bytes(self._to_board), bytearray()
        if data:
            self.board.feed(data)
        self._tick += 10
        self.clock.elapsed_ns += 1_000_000
        self.board.advance_to(self._tick)
        out = self.board.take_output()
        if not self._plugged:
            return
        if out:
            out = b"".join(self.tap(line) for line in out.splitlines(keepends=True))
        if not self._awake:
            self._held += out
            return
        if out:
            self.station.feed(out)
        due = self.station.deadline()
        if due is not None and self.now_s >= due:
            self.station.tick()

    def pass_s(self, seconds: float) -> "Lab":
        """Let time pass."""
        for _ in range(round(seconds * 1000)):
            self.step()
        return self

    def until(self, condition: Callable[[], Any], within_s: float = 20.0) -> "Lab":
        """Let time pass until something is so; fails where it does not come."""
        for _ in range(round(within_s * 1000)):
            if condition():
                return self
            self.step()
        assert condition(), f"not within {within_s:g} s: {self.lines()[-6:]}"
        return self

    def stall(self, seconds: float, *, keep: int = 1 << 20) -> "Lab":
        """The host stands still; the wire holds so many bytes for it; then it wakes."""
        self._awake = False
        self.pass_s(seconds)
        self._awake = True
        held, self._held = bytes(self._held[:keep]), bytearray()
        if held:
            self.station.feed(held)
        return self

    def unplug(self) -> "Lab":
        """The port goes away."""
        self._plugged = False
        self._to_board.clear()
        self.station.gone("unplugged")
        return self

    def plug(self) -> "Lab":
        """The port is back."""
        self.board.take_output()
        self._plugged = True
        self.station.connect()
        return self

    # ------------------------------------------------------------ the host's side

    @property
    def core(self) -> Core:
        """The host's core."""
        return self.station.core

    @property
    def run(self) -> ActiveRun:
        """The run."""
        assert self.core.run is not None
        return self.core.run

    @property
    def permission(self) -> Permission:
        """What the MCU may do on our word."""
        return self.core.state.permission

    def lines(self) -> list[str]:
        """What was said."""
        return [line.text for line in self.core.log]

    def said(self, part: str) -> bool:
        """Whether something with these words was said."""
        return any(part in line for line in self.lines())

    def picture(self) -> Snapshot:
        """What the screens show now."""
        return self.station.snapshot()

    def ask(self, method: str, ticket: str = ME, **params: Any) -> dict[str, Any]:
        """One request of a client with this ticket."""
        return self.station.handle(method, {"ticket": ticket, **params}, ticket)

    def greet(self) -> "Lab":
        """Open the port and wait for the greeting and a block."""
        self.station.connect()
        return self.until(lambda: self.core.state.link is not LinkState.NONE and self.core.sampled, 10.0)

    def ready(self) -> "Lab":
        """Greeted, with control, and the latch of the boot cleared."""
        self.greet()
        self.ask("seat.take")
        return self.reset()

    def reset(self) -> "Lab":
        """Name what is latched."""
        if self.core.state.latched:
            self.pass_s(0.2)
            self.ask("reset", causes=list(latched_words(self.core)))
            self.until(lambda: not self.core.state.latched, 5.0)
        return self

    def prepare(self, plan: str | None = None, *, specimen: str = "A-1", **params: Any) -> dict[str, Any]:
        """Have a plan checked and its record opened."""
        polarity = "negative" if self.bench.polarity < 0 else "positive"
        sheet = SHEET.format(specimen=specimen, polarity=polarity)
        return self.ask("run", plan=_text(plan or plan_of()), plan_file="scenario.yaml", sheet=_text(sheet),
                        sheet_file="sheet.yaml", **params)

    def arm(self, **params: Any) -> "Lab":
        """The first act, waited for."""
        self.ask("arm", **params)
        return self.until(lambda: self.permission is Permission.REQUESTED, 2.0)

    def press(self) -> "Lab":
        """The second act, at the bench."""
        self.board.plant.press(0.5)
        return self

    def energise(self, plan: str | None = None) -> "Lab":
        """Ready, prepared, armed, pressed, energised."""
        self.ready()
        self.prepare(plan)
        self.arm().press()
        return self.until(lambda: self.run.stage is Stage.LIVE, 6.0)

    def direct(self) -> "Lab":
        """A direct run, energised."""
        self.ready()
        self.ask("direct", specimen="D-1")
        self.arm().press()
        return self.until(lambda: self.run.stage is Stage.LIVE, 6.0)

    def held(self) -> "Lab":
        """In the hold, its clock running."""
        return self.until(lambda: self.permission is Permission.HOLD and self.run.runner.inside, 10.0)

    def closed(self, within_s: float = 30.0) -> ActiveRun:
        """The run, once its record is closed."""
        return self.until(lambda: self.run.stage is Stage.CLOSED and self.jobs, within_s).run

    # ------------------------------------------------------------ the bench's side

    def fault(self, name: str, value: float | None = None) -> "Lab":
        """Switch a fault on."""
        self.board.plant.faults.on(name, value)
        return self

    def mend(self, name: str) -> "Lab":
        """Switch a fault off."""
        self.board.plant.faults.off(name)
        return self

    def states(self, since_s: float = 0.0) -> list[dict[str, Any]]:
        """The plant's truth from a time on."""
        return [line for line in self.truth if line["kind"] == "state" and line["t_s"] >= since_s]

    def happened(self, what: str) -> list[dict[str, Any]]:
        """The plant's events of a kind."""
        return [line for line in self.truth if line["kind"] == "event" and line["what"] == what]

    def v_true(self) -> float:
        """The voltage at the specimen."""
        return float(self.board.plant.v_true)

    def released(self, since_s: float = 0.0) -> bool:
        """Whether the MCU has released the inhibit with the relay closed, by the plant's truth."""
        return any(not line["inhibit"] and line["relay"] for line in self.states(since_s))

    def cut(self) -> bool:
        """Whether everything is in its cut position, by the plant's truth."""
        core = self.board.mcu.core
        return bool(core.inhibit and core.clear and not core.relay and core.v_word == 0)

    def idle(self) -> bool:
        """Whether nothing is live on the host's word."""
        return self.permission not in LIVE and self.permission is Permission.IDLE


def shown(change: Callable[[Block], Block]) -> Callable[[bytes], bytes]:
    """A tap that shows the host other blocks than the MCU sent."""
    def tap(line: bytes) -> bytes:
        if not line.startswith(b"b "):
            return line
        return seal(encode_block(change(decode_block(line[:-13], "ss")), "ss"))

    return tap


def fallen(volts_code: int, samples: int = 4) -> Callable[[Block], Block]:
    """A change that lets the last samples of one block fall to this code, once."""
    done: list[int] = []

    def change(block: Block) -> Block:
        if done:
            return block
        done.append(block.index)
        codes = list(block.codes)
        for at in range(len(codes) - 2 * samples, len(codes), 2):
            codes[at] = volts_code
        return replace(block, codes=tuple(codes))

    return change
