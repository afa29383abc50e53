"""An energised run in memory, caught once and given again: the same bytes at the same times to any number of stations.

A stand-in and a station go through greeting, reset, run, arm, press, ramp and into a long hold under a virtual clock;
everything that the station was handed is kept.  Handed to a fresh station that draws the same numbers, it brings that
one to the same place, since the core decides by bytes and time alone.  So a measurement times the host by itself.
"""

import random
from base64 import b64encode
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from hvhost.bench.file import load_bench
from hvhost.ports.memory import MemoryLine
from hvhost.publish.compose import latched_words
from hvhost.publish.station import CloseJob, Openers, Station
from hvhost.standin.bench import StandIn, config_of
from hvhost.standin.eeprom import Eeprom
from hvhost.standin.params import changed, demo
from hvhost.supervisor.runs import Outcome
from hvhost.supervisor.states import LinkState, Permission
from hvhost.wire.frames import Block, decode_block, encode_block
from hvhost.wire.lines import seal, unseal
from hvhost.words.clocks import VirtualClock
from hvhost.words.errors import CommandRefused

WHO = "speed"
SPECIMEN = "specimen.strength_v=40 kV"  # nothing breaks down before it is asked to
TO_V, PRESS_S = 10_000, 0.5
HOLD_S = 8.0  # of the hold that are caught; more is made from these
# every rule has a limit here: trip, level and time, overvoltage, arc energy, and the bench's own
PLAN = """plan: Speed
released: {{by: speed, on: 2026-01-01}}
current_limit: 1 mA
limits: {{trip: 3 mA, level: 2 mA, level_time: 500 ms, overvoltage: 12 kV, arc_energy: 5 J}}
steps:
  - ramp: {{to: {to_v} V, duration: {ramp_s:.3f} s}}
  - hold: {{name: long, for: 2 h, at_most: 3 h, clock: accumulate}}
  - ramp: {{to: 0 V, rate: 2 kV/s}}
acceptance:
  - criterion: no breakdown
"""


def request(ramp_s: float) -> dict[str, Any]:
    """What a client sends to open a run of the plan above."""
    text = PLAN.format(to_v=TO_V, ramp_s=ramp_s)
    return {"plan": b64encode(text.encode()).decode(), "plan_file": "speed.plan.yaml", "specimen": "S", "reason": WHO,
            "repeat_of": WHO}


@dataclass(frozen=True, slots=True)
class Given:
    """One thing that a station was handed at a virtual time: bytes, a request, or (neither) a tick of the timer."""

    at_ns: int
    data: bytes | None = None
    request: tuple[str, Mapping[str, Any]] | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Scene:
    """What was handed over, and from which entry on the output was ramping and holding; ``signs`` of the codes."""

    bench: Path
    seed: int
    signs: str
    given: tuple[Given, ...]
    ramp: int
    hold: int

    def player(self, entry: int, runs: Path, openers: Openers) -> "Player":
        """Return a fresh station that was handed everything before this entry."""
        player = Player(self, runs, openers)
        player.go(self.given[:entry])
        return player

    def blocks(self, first: int, last: int | None = None) -> list[Block]:
        """The blocks among the entries from ``first`` to before ``last``."""
        found = []
        for given in self.given[first:last]:
            body = unseal(given.data[:-1]) if given.data is not None and given.data.startswith(b"b ") else None
            if isinstance(body, bytes):
                found.append(decode_block(body, self.signs))
        return found

    def further(self, count: int) -> Iterator[Given]:
        """Go on with the hold for so many blocks after its first: its own codes again, counted on."""
        own = self.blocks(self.hold)
        first, pairs = own[0], own[0].pairs
        at_ns = self.given[self.hold].at_ns
        ticks = own[1].tick - first.tick
        for k in range(count):
            block = own[k % len(own)]
            line = seal(encode_block(Block(
                first.index + k * pairs, first.tick + k * ticks, first.v_word, first.i_word, first.state, 0,
                first.inputs, first.missed, first.event, first.arc, block.codes), self.signs))
            yield Given(at_ns + k * ticks * 100_000, line)


class Player:
    """A station that is handed a scene's entries; what it writes is thrown away unless ``write`` says otherwise."""

    def __init__(self, scene: Scene, runs: Path, openers: Openers) -> None:
        self.scene = scene
        self.clock = VirtualClock()
        self.write: Callable[[bytes], bytes] = lambda data: b""
        self.station = _station(scene.bench, scene.seed, self.clock, runs, openers, lambda data: self.write(data))
        self.station.connect()

    def go(self, entries: "tuple[Given, ...] | list[Given]") -> None:
        """Hand over these entries."""
        station, clock = self.station, self.clock
        for given in entries:
            clock.elapsed_ns = given.at_ns
            if given.data is not None:
                station.feed(given.data)
            elif given.request is not None:
                station.handle(given.request[0], given.request[1], WHO)
            else:
                station.tick()

    def close(self) -> None:
        """Let go of the recorder's file and thread, if a run is open."""
        if self.station.recording is not None:
            self.station.recording.close(Outcome.CANCELLED)


def _station(bench: Path, seed: int, clock: VirtualClock, runs: Path, openers: Openers,
             write: Callable[[bytes], bytes]) -> Station:
    rng = random.Random(seed)

    def closed(job: CloseJob) -> None:
        job.recording.close(Outcome.CANCELLED)

    station = Station(load_bench(bench), clock, lambda: rng.randrange(1, 1 << 32), runs_root=runs, openers=openers,
                      write=write, on_close=closed, port="memory", rehearsal=True)
    station.requests.tag = lambda: rng.randrange(1, 1 << 32)
    return station


class _Tap:
    """Stands between the line and the station and keeps what passes."""

    def __init__(self, station: Station, clock: VirtualClock) -> None:
        self.station, self.clock = station, clock
        self.given: list[Given] = []

    def feed(self, data: bytes) -> None:
        self.given.append(Given(self.clock.elapsed_ns, data))
        self.station.feed(data)

    def tick(self) -> None:
        self.given.append(Given(self.clock.elapsed_ns))
        self.station.tick()

    def deadline(self) -> float | None:
        return self.station.deadline()

    def handle(self, method: str, **params: Any) -> Any:
        given = {"ticket": WHO, **params}
        self.given.append(Given(self.clock.elapsed_ns, request=(method, given)))
        return self.station.handle(method, given, WHO)


def catch(bench: Path, runs: Path, openers: Openers, *, ramp_s: float, hold_s: float = HOLD_S, seed: int = 1) -> Scene:
    """Play the scene once and keep it: all of the ramp, ``hold_s`` seconds of the hold."""
    clock = VirtualClock()
    plant = changed(demo(), [SPECIMEN])
    config = config_of(plant)
    standin = StandIn(plant, seed, eeprom=Eeprom(load_bench(bench).settings()), config=config)
    line = MemoryLine(standin, clock, config.tick_hz, config.sample_ticks)
    station = _station(bench, seed, clock, runs, openers, line.write)
    tap = _Tap(station, clock)
    line.station = tap  # type: ignore[assignment]
    core = station.core
    station.connect()
    _wait(line, lambda: core.state.link is LinkState.GREETED and core.sample is not None, 10.0)
    tap.handle("seat.take")
    tap.handle("reset", causes=list(latched_words(core)))
    _wait(line, lambda: not core.state.latched, 5.0)
    opened = tap.handle("run", **request(ramp_s))
    tap.handle("arm", typed=opened["run"])
    _wait(line, lambda: core.state.permission is Permission.REQUESTED, 5.0)
    standin.plant.press(PRESS_S)
    _wait(line, lambda: core.state.permission is Permission.RAMP, 30.0)
    ramp = len(tap.given)
    _wait(line, lambda: core.state.permission is Permission.HOLD, ramp_s + 10.0)
    line.run(lambda: False, 2.0)  # let the readback settle and the hold's clock start
    hold = len(tap.given)
    line.run(lambda: False, hold_s)
    if station.recording is not None:
        station.recording.close(Outcome.CANCELLED)
    return Scene(bench=bench, seed=seed, signs=config.signs, given=tuple(tap.given), ramp=ramp, hold=hold)


def _wait(line: MemoryLine, look: Callable[[], bool], for_s: float) -> None:
    if not line.run(look, for_s):
        raise CommandRefused("an energised run in memory", "it did not come so far", "speed",
                             "see whether 'hvhost rehearse --fast' runs")
