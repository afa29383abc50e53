"""A rehearsal under a virtual clock: the same core, record and measures, as fast as the machine allows."""

import random
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from hvhost.bench.model import Bench
from hvhost.ports.memory import MemoryLine
from hvhost.publish.station import CloseJob, Station, end_recording
from hvhost.record.folder import RunFolder
from hvhost.record.recorder import InlineRecorder
from hvhost.report.closing import Closed, close_run
from hvhost.standin.bench import StandIn, config_of
from hvhost.standin.eeprom import Eeprom
from hvhost.standin.params import PlantParams
from hvhost.standin.truth import TruthLog
from hvhost.supervisor.runs import Stage
from hvhost.supervisor.states import LinkState, Permission
from hvhost.words.clocks import VirtualClock
from hvhost.words.errors import CommandRefused

GREET_S = 10.0
RESET_S = 5.0
PRESS_S = 0.5
WHO = "rehearsal"


@dataclass(slots=True, kw_only=True)
class Rehearsed:
    """What a rehearsal gave, with the split of the wall time."""

    folder: RunFolder
    status: dict[str, Any]
    closed: Closed | None
    virtual_s: float
    wall_s: float
    close_s: float
    pairs: int
    events: list[str] = field(default_factory=list)


class FastRehearsal:
    """One bench with its stand-in in memory; everything follows from bench, plan, sheet, faults, seed and date."""

    def __init__(self, bench: Bench, plant: PlantParams, *, seed: int, runs: Path, day: datetime,
                 faults: Sequence[str] = (), truth: TruthLog | None = None,
                 say: Callable[[str], None] = lambda text: None) -> None:
        rng = random.Random(seed)
        self.clock = VirtualClock(utc_origin_ns=int(day.replace(tzinfo=UTC).timestamp()) * 1_000_000_000)
        config = config_of(plant)
        if truth is not None:
            truth.start(seed=seed, profile=plant.name, tick_hz=config.tick_hz, faults=list(faults))
        self.standin = StandIn(plant, seed, eeprom=Eeprom(bench.settings()), config=config, faults=faults, truth=truth)
        self.line = MemoryLine(self.standin, self.clock, config.tick_hz, config.sample_ticks)
        self.station = Station(bench, self.clock, lambda: rng.randrange(1, 1 << 32), runs_root=runs,
                               openers=InlineRecorder.open, write=self.line.write, on_close=self._close,
                               port="memory", rehearsal=True)
        self.station.requests.tag = lambda: rng.randrange(1, 1 << 32)
        self.line.station = self.station
        self.closed: Closed | None = None
        self.close_s = 0.0
        self._say, self._said = say, 0
        self._pressed = False

    def _close(self, job: CloseJob) -> None:
        begun = time.perf_counter()
        end_recording(job)
        self.closed = close_run(job.folder)
        self.close_s += time.perf_counter() - begun
        self.station.closed(self.closed.result.verdict.value)

    def prepare(self) -> None:
        """Greet, and clear the latch that every boot leaves."""
        station, core = self.station, self.station.core
        station.connect()
        if not self.line.run(lambda: core.state.link is not LinkState.NONE and core.sample is not None, GREET_S):
            raise CommandRefused("a greeted stand-in", core.link_text, "rehearse")
        station.handle("seat.take", {"ticket": "rehearsal"}, WHO)
        if core.state.latched and core.state.link is LinkState.GREETED:
            self._reset()

    def _reset(self) -> None:
        """Clear the latch.  Where no reading tells the discharge the MCU wants bleed times and 'grounded by hand'."""
        from hvhost.publish.compose import latched_words

        core, bench = self.station.core, self.station.core.bench
        blind = not (bench.monitor_powered_after_cut and bench.monitor_at_specimen)
        if blind:
            self.line.run(lambda: False, bench.bleed_s * bench.bleeds)
        causes = list(latched_words(core))
        self.station.handle("reset", {"ticket": "rehearsal", "causes": causes, "grounded": blind}, WHO)
        self.line.run(lambda: not core.state.latched, RESET_S)

    def run(self, params: dict[str, Any], for_s: float) -> Rehearsed:
        """Open, arm, press, follow to the close, at most for so many virtual seconds."""
        station, core = self.station, self.station.core
        begun, from_ns = time.perf_counter(), self.clock.elapsed_ns
        opened = station.handle("run", {**params, "ticket": "rehearsal"}, WHO)
        folder = station.folder
        assert folder is not None
        try:
            station.handle("arm", {"ticket": "rehearsal", "typed": opened["run"]}, WHO)
            self.line.run(self._look, for_s)
        finally:
            if core.run is not None and core.run.stage is Stage.PREPARED:  # refused: its record is closed all the same
                station.handle("cancel", {"why": core.run.why or "the arm was refused"}, WHO)
        status = station.handle("status", {}, WHO)
        wall_s = time.perf_counter() - begun - self.close_s
        pairs = core.assembler.counters.pairs if core.assembler else 0
        return Rehearsed(folder=folder, status=status, closed=self.closed, wall_s=wall_s, close_s=self.close_s,
                         virtual_s=(self.clock.elapsed_ns - from_ns) / 1e9, pairs=pairs)

    def _look(self) -> bool:
        core = self.station.core
        for line in core.log:
            if line.number > self._said:
                self._said = line.number
                self._say(f"{line.now_s:9.3f} s  {line.severity:<9} {line.text}")
        if core.state.permission is Permission.REQUESTED and not self._pressed:
            self._pressed = True
            self.standin.plant.press(PRESS_S)
        return self.closed is not None or (
            core.run is not None and core.run.stage is Stage.PREPARED and bool(core.run.why))
