"""The daemon's life on a bench in memory: what feeds the watchdog, what is told, what a full disk does."""

import asyncio
import json
import socket
from collections.abc import Iterator
from itertools import pairwise
from pathlib import Path
from typing import Any

import pytest

from hvhost.publish import machine
from hvhost.publish.life import Life, status_text
from hvhost.publish.log import Log
from hvhost.publish.notify import Notifier
from hvhost.publish.snapshot import DiskView
from hvhost.record.blockfile import read_blocks
from hvhost.record.entries import Entry, NoteEntry
from hvhost.supervisor.runs import Outcome
from hvhost.supervisor.states import LIVE, LinkState, Permission
from hvhost.words.errors import CommandRefused
from tests.supervisor.lab import HOLD, Lab, plan_of

WATCHDOG_S = 2.0
LONG_HOLD = HOLD.replace("for: 2 s, at_most: 8 s", "for: 60 s, at_most: 90 s")


class Told(Log):
    """Keeps what the log was given."""

    def __init__(self) -> None:
        super().__init__()
        self.lines: list[tuple[str, str, dict[str, Any]]] = []

    def write(self, level: str, text: str, **fields: object) -> None:
        """Keep it."""
        self.lines.append((level, text, fields))


class Served:
    """A bench in memory with a life: what a daemon does around each step, and a fake service manager."""

    def __init__(self, folder: Path) -> None:
        self.manager = socket.socket(socket.AF_UNIX, socket.SOCK_DGRAM | socket.SOCK_NONBLOCK)
        self.manager.bind(str(folder / "notify"))
        self.notifier = Notifier(str(folder / "notify"), WATCHDOG_S)
        self.lab = Lab(folder)
        self.log = Told()
        self.life = Life(self.lab.station, self.notifier, self.log)
        self.fed: list[float] = []  # by virtual time
        self.other: list[str] = []

    def pass_s(self, seconds: float, *, turns: bool = True) -> None:
        """Let time pass; ``turns``: the loop turns meanwhile."""
        for k in range(round(seconds * 1000)):
            self.lab.step()
            self.life.read_was_judged()
            if turns and k % 500 == 0:
                self.turn()
            self.look()

    def turn(self) -> None:
        """The loop's own beat."""
        lab = self.lab
        self.life.watchdog.turned(lab.now_s, idle=lab.permission is Permission.IDLE)

    def look(self) -> None:
        """Take what the manager was sent."""
        try:
            while True:
                text = self.manager.recv(4096).decode()
                if text == "WATCHDOG=1":
                    self.fed.append(self.lab.now_s)
                else:
                    self.other.append(text)
        except BlockingIOError:
            return

    def longest_gap(self, since_s: float) -> float:
        """The longest time without a keep-alive from then to now."""
        times = [since_s, *(t for t in self.fed if t >= since_s), self.lab.now_s]
        return max(b - a for a, b in pairwise(times))

    def energise(self) -> None:
        """Into a long hold."""
        self.lab.energise(plan_of(LONG_HOLD)).held()

    def close(self) -> None:
        """Let go of everything."""
        self.notifier.close()
        self.manager.close()
        self.lab.end()


@pytest.fixture
def served(tmp_path: Path) -> Iterator[Served]:
    """One bench."""
    made = Served(tmp_path)
    yield made
    made.close()


def test_judged_blocks_keep_it_alive_without_any_turn(served: Served) -> None:
    """In a hold the keep-alives come from blocks alone, well within the watchdog's time."""
    served.energise()
    since_s = served.lab.now_s
    served.pass_s(5.0, turns=False)
    assert served.longest_gap(since_s) < WATCHDOG_S / 2


def test_a_loop_that_turns_without_judging_starves_while_anything_is_permitted(served: Served) -> None:
    """Blocks arrive, timers run, but nothing is judged: no keep-alive, whatever turns."""
    served.energise()
    core = served.lab.core
    core.guard = None  # the fault: samples come and pass no judgement, and the chain renews nothing
    core.assembler = None
    sample = core.sample
    fed = len(served.fed)
    for _ in range(10):
        served.life.read_was_judged()
        served.turn()
        served.look()
    assert core.sample is sample
    assert served.lab.permission in LIVE
    assert len(served.fed) - fed <= 1  # the last block that was judged


def test_a_backlog_that_is_judged_late_feeds_nothing(served: Served) -> None:
    """Samples older than the lease on arrival prove no living path."""
    served.energise()
    served.pass_s(1.0)
    lab = served.lab
    fed = len(served.fed)
    lab.stall(3.0, keep=2000)  # what the wire held is the oldest of it
    served.life.read_was_judged()
    served.look()
    assert lab.core.sample is not None
    assert len(served.fed) == fed


def test_an_idle_bench_and_a_lost_one_live_by_the_loops_turns(served: Served) -> None:
    """Nothing is permitted: the loop is all there is to prove, with a board or without."""
    lab = served.lab
    since_s = lab.now_s
    served.pass_s(3.0)
    assert lab.core.state.link is LinkState.NONE
    assert served.longest_gap(since_s) < WATCHDOG_S / 2
    served.energise()
    served.pass_s(1.0)
    lab.unplug()
    assert lab.core.state.link is LinkState.LOST
    since_s = lab.now_s
    served.pass_s(4.0)
    assert served.longest_gap(since_s) < WATCHDOG_S / 2


def test_the_beat_asks_whether_the_bench_is_idle(served: Served) -> None:
    """The daemon's own task feeds in idle and not in a hold."""

    async def one_beat() -> None:
        beating = asyncio.create_task(served.life.beat())
        await asyncio.sleep(0)
        await asyncio.sleep(0)
        beating.cancel()

    asyncio.run(one_beat())
    served.look()
    assert len(served.fed) == 1
    served.energise()
    served.look()
    fed = len(served.fed)
    asyncio.run(one_beat())
    served.look()
    assert len(served.fed) == fed


def test_what_the_core_says_is_logged_once_with_its_run(served: Served) -> None:
    """Every numbered line in order with its level; the run's number where there is one."""
    served.energise()
    lab = served.lab
    served.life.shown(lab.picture())
    served.life.shown(lab.picture())
    assert [fields["n"] for _, _, fields in served.log.lines] == [line.number for line in lab.core.log]
    assert {fields["run"] for _, _, fields in served.log.lines} == {lab.run.spec.run_id}
    lab.ask("cut")
    served.life.shown(lab.picture())
    assert any("cut by me" in text for _, text, _ in served.log.lines)


def test_the_managers_status_follows_the_state_not_the_samples(served: Served) -> None:
    """One message for one state, at most one a second."""
    served.lab.ready()
    for _ in range(30):
        served.lab.pass_s(0.1)
        served.life.shown(served.lab.picture())
    served.look()
    assert served.other == ["STATUS=link greeted; idle; voltage unknown"]
    served.lab.prepare(plan_of())
    picture = served.lab.picture()
    assert status_text(picture).endswith(f"; run {served.lab.run.spec.run_id}")


def test_the_end_says_how_long_lowering_may_take(served: Served) -> None:
    """The manager is asked for more than the longest lower, then again and again while records are closed."""
    served.life.ending()
    served.life.closing()
    served.life.closing()
    served.look()
    stopping, *extended = served.other
    assert stopping.startswith("STOPPING=1\n")
    assert int(stopping.rpartition("=")[2]) > served.lab.bench.lower_max_s * 1e6
    assert len(extended) == 1
    served.lab.pass_s(6.0)
    served.life.closing()
    served.look()
    assert len(served.other) == 3


def test_a_disk_below_its_floor_lowers_the_run_and_refuses_the_next(
        served: Served, monkeypatch: pytest.MonkeyPatch) -> None:
    """Ends by lowering, says why, and no run is opened until there is room again."""
    served.energise()
    lab = served.lab
    lab.station.look_at_machine(DiskView(free_b=400e6, floor_b=500e6, ok=False))
    lab.until(lambda: lab.permission is Permission.LOWERING, 1.0)
    assert lab.said("the disk of the runs folder has 400 MB left, below its floor of 500 MB")
    assert not lab.picture().record.ok
    assert not lab.picture().disk.ok
    run = lab.closed()
    assert run.outcome is Outcome.RECORD_FAILED
    assert lab.cut()
    monkeypatch.setattr(machine, "free_bytes", lambda folder: 400e6)
    with pytest.raises(CommandRefused, match="at least 500 MB free"):
        lab.prepare(plan_of(), specimen="A-2")
    monkeypatch.setattr(machine, "free_bytes", lambda folder: 600e6)
    lab.prepare(plan_of(), specimen="A-2")


def test_the_disk_is_asked_again_and_again_off_the_loop(served: Served, monkeypatch: pytest.MonkeyPatch) -> None:
    """What the thread found reaches the picture."""
    monkeypatch.setattr(machine, "free_bytes", lambda folder: 123e9)

    async def one_look() -> None:
        looking = asyncio.create_task(served.life.look_at_disk())
        while not served.lab.station.machine.disk.free_b:
            await asyncio.sleep(0)
        looking.cancel()

    asyncio.run(one_look())
    assert served.lab.picture().disk.free_b == 123e9


def test_a_runs_close_notes_the_worst_stall(served: Served) -> None:
    """The record keeps how late the loop was while the run was open."""
    served.energise()
    served.lab.station.machine.gauge.beat(1.0, 1.03, 0.001)
    served.lab.ask("lower")
    served.lab.closed()
    notes = [entry.content.data for entry in read_blocks(served.lab.jobs[0].folder.blocks)
             if isinstance(entry, Entry) and isinstance(entry.content, NoteEntry)]
    (found,) = [note for note in notes if note["what"] == "machine"]
    assert found["loop"]["run_s"] == pytest.approx(0.03)
    assert json.dumps(found)


def test_a_stall_too_long_for_the_lease_is_an_event_and_a_finding(served: Served) -> None:
    """Told once, and in every preflight of the hour."""
    lab = served.lab.ready()
    lab.station.machine.gauge.beat(1.0, 1.2, 0.0)
    for _ in range(3):
        lab.station.look_at_machine(lab.station.machine.disk)
    assert sum("may lapse in a run" in line for line in lab.lines()) == 1
    assert any("lease.time" in text for text in lab.prepare(plan_of())["findings"])
