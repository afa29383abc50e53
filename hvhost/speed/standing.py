"""B6, B14 and the second half of B11: a daemon as a process of its own, against a stand-in on a pseudo-terminal.

B6 watches the process while an energised run is recorded: resident memory, descriptors, and the processor that it
takes.  B14 kills it in that run and counts from the new start until it reports a greeted, passive bench.  B11 counts
from the start of ``hvhost cut`` to its bytes at the port.
"""

import contextlib
import os
import subprocess
import sys
import time
from dataclasses import dataclass
from pathlib import Path
from statistics import median
from typing import Any, Protocol

from hvhost.publish.client import Client
from hvhost.speed.board import Board
from hvhost.speed.figures import Line
from hvhost.speed.scene import WHO, request
from hvhost.speed.setting import Setting
from hvhost.words.errors import CannotConnect, CommandRefused

START_S, STEP_S, CUT_S = 30.0, 0.025, 5.0  # a client may ask 50 times a second
CUTS, RESTARTS = 20, 5
QUICK_CUTS, QUICK_RESTARTS = 3, 2
MEGABYTE = 1e6
TICKS = os.sysconf("SC_CLK_TCK")


class Opened(Protocol):
    """What a daemon opens."""

    device: str


class Pressed(Protocol):
    """What has an arm input."""

    def press(self) -> None:
        """Press it."""


class Daemon:
    """``hvhost serve`` on the board's device."""

    def __init__(self, setting: Setting, board: Opened, runs: Path, bench: Path | None = None) -> None:
        self.socket = str(setting.place() / "bench.sock")
        self._arguments = ["serve", str(bench or setting.bench), "--port", board.device, "--socket", self.socket,
                           "--standin", "--runs", str(runs)]
        self.log = setting.place() / "serve.log"
        self.begun = 0.0
        self.process: subprocess.Popen[bytes] | None = None

    def start(self) -> None:
        """Start the process; `begun` is the moment before."""
        with self.log.open("ab") as log:
            self.begun = time.perf_counter()
            self.process = subprocess.Popen([sys.executable, "-m", "hvhost", *self._arguments],
                                            stdin=subprocess.DEVNULL, stdout=log, stderr=log)

    def kill(self) -> None:
        """End it without a word, as a crash does."""
        if self.process is not None:
            self.process.kill()
            self.process.wait()

    def reporting(self) -> float:
        """Seconds from the start until it reports a greeted, passive bench with a reading; raises where it does not."""
        while time.perf_counter() - self.begun < START_S:
            try:
                with Client.connect(self.socket) as bench:
                    while time.perf_counter() - self.begun < START_S:
                        shot = bench.call("snapshot") or {}
                        if shot.get("link") == "greeted" and shot.get("reading"):
                            if shot.get("permission") != "idle":
                                raise CannotConnect("a passive daemon", str(shot.get("permission")), "speed B14")
                            return time.perf_counter() - self.begun
                        time.sleep(STEP_S)
            except CannotConnect:
                if self.process is not None and self.process.poll() is not None:
                    break
                time.sleep(STEP_S)
        words = self.log.read_text(errors="replace").strip().splitlines()
        raise CannotConnect("a daemon that reports", words[-1] if words else "nothing", "speed")


@dataclass(frozen=True, slots=True)
class Seen:
    """One look at a process: when, resident bytes, open descriptors, processor seconds."""

    at_s: float
    resident: int
    descriptors: int
    cpu_s: float


def measure_memory(setting: Setting) -> list[Line]:
    """Return the lines of B6, with the processor's share beside them."""
    with Board(setting.bench) as board:
        daemon = Daemon(setting, board, setting.place())
        daemon.start()
        try:
            daemon.reporting()
            with Client.connect(daemon.socket) as bench:
                energise(bench, board)
                seen = _watch(setting, daemon, bench)
                bench.call("lower")
        finally:
            daemon.kill()
    return _memory_lines(setting, seen)


def energise(bench: Client, board: Pressed) -> None:
    """Take control, clear the boot's latch, open a long run, arm, press; returns when the output is on."""
    ticket = bench.call("seat.take", {"as": WHO, "reason": WHO})["ticket"]
    until_shot(bench, lambda shot: bool(shot.get("reading")), "a reading")
    until_shot(bench, lambda shot: _cleared(bench, ticket, shot), "a cleared latch")
    opened = bench.call("run", {**request(3.0), "ticket": ticket, "as": WHO})
    bench.call("arm", {"ticket": ticket, "typed": opened["run"], "as": WHO})
    until_shot(bench, lambda shot: shot.get("permission") == "requested", "an open request")
    board.press()
    until_shot(bench, lambda shot: shot.get("permission") == "running" and shot.get("phase") == "hold", "a hold")


def _cleared(bench: Client, ticket: str, shot: dict[str, Any]) -> bool:
    """Whether nothing is latched; else ask again for the reset, which is refused until the voltage is gone."""
    if shot.get("latched"):
        with contextlib.suppress(CommandRefused):
            bench.call("reset", {"ticket": ticket, "causes": shot["latched"], "as": WHO})
        time.sleep(0.3)
    return not shot.get("latched")


def until_shot(bench: Client, met: Any, what: str) -> None:
    until = time.monotonic() + START_S
    shot: dict[str, Any] = {}
    while time.monotonic() < until:
        shot = bench.call("snapshot") or {}
        if met(shot):
            return
        time.sleep(0.05)
    raise CannotConnect(what, f"{shot.get('link')}, {shot.get('permission')}, {shot.get('link_text')}", "speed")


def look(pid: int) -> Seen:
    """Look at a process once."""
    status = Path(f"/proc/{pid}/status").read_text()
    resident = next(int(line.split()[1]) * 1024 for line in status.splitlines() if line.startswith("VmRSS"))
    fields = Path(f"/proc/{pid}/stat").read_text().rpartition(")")[2].split()
    return Seen(time.monotonic(), resident, len(os.listdir(f"/proc/{pid}/fd")),
                (int(fields[11]) + int(fields[12])) / TICKS)


def _watch(setting: Setting, daemon: Daemon, bench: Client) -> list[Seen]:
    assert daemon.process is not None
    seen: list[Seen] = []
    end = time.monotonic() + setting.minutes * 60.0
    while time.monotonic() < end:
        seen.append(look(daemon.process.pid))
        setting.say(f"watching the daemon, {max(0.0, end - time.monotonic()):.0f} s to go, "
                    f"{seen[-1].resident / MEGABYTE:.0f} MB")
        time.sleep(min(1.0, setting.minutes * 60.0 / 20.0))
    seen.append(look(daemon.process.pid))
    shot = bench.call("snapshot") or {}
    if shot.get("phase") != "hold":
        raise CannotConnect("a run that still holds", str(shot.get("permission")), "speed B6")
    return seen


def _memory_lines(setting: Setting, seen: list[Seen]) -> list[Line]:
    fifth = max(1, len(seen) // 5)
    early = median(one.resident for one in seen[fifth : 2 * fifth] or seen)
    late = median(one.resident for one in seen[-fifth:])
    counts = [one.descriptors for one in seen]
    span_s = seen[-1].at_s - seen[0].at_s
    share = (seen[-1].cpu_s - seen[0].cpu_s) / span_s if span_s else 0.0
    long = f"{setting.minutes:g} min at 1 k pairs/s, recorder on"
    if setting.minutes < 10.0:
        long += " (shortened: 10 min judge it)"
    raw = {"resident": [one.resident for one in seen], "descriptors": counts, "seconds": span_s}
    return [
        Line(budget="B6", what="resident memory, largest", measured=max(one.resident for one in seen) / MEGABYTE,
             unit="MB", bound=150.0, aim=80.0, against=long, raw=raw),
        Line(budget="B6", what="growth of resident memory", measured=(late - early) / MEGABYTE, unit="MB", bound=1.0,
             aim=0.0, against=f"median of the last fifth less that of the second, {long}"),
        Line(budget="B6", what="descriptors, largest less smallest", measured=float(max(counts) - min(counts)), unit="",
             bound=0.0, against=f"{min(counts)} open, {long}"),
        Line(budget="B5", what="processor of the daemon at 1 k pairs/s", measured=share, unit="core", bound=0.25,
             aim=0.1, judged=False, against="one core; the bound is for 10 k pairs/s with a broker"),
    ]


def measure_restart(setting: Setting) -> list[Line]:
    """Return the line of B14: the daemon is killed in a run each time."""
    seconds = []
    with Board(setting.bench) as board:
        daemon = Daemon(setting, board, setting.place())
        daemon.start()
        try:
            daemon.reporting()
            for k in range(QUICK_RESTARTS if setting.minutes < 1.0 else RESTARTS):
                setting.say(f"restart {k + 1}")
                with Client.connect(daemon.socket) as bench:
                    energise(bench, board)
                    time.sleep(1.0)
                daemon.kill()
                board.wait_off()
                daemon.start()
                seconds.append(daemon.reporting())
        finally:
            daemon.kill()
    return [Line(budget="B14", what="killed in a run, restart to passive and reporting", measured=max(seconds),
                 unit="s", bound=2.0, aim=0.5, against=f"the wall clock, longest of {len(seconds)}",
                 note=f"median {median(seconds):.2f} s", raw={"seconds": seconds})]


def measure_cut(setting: Setting) -> list[Line]:
    """Return the line of ``hvhost cut`` of B11."""
    seconds = []
    with Board(setting.bench) as board:
        daemon = Daemon(setting, board, setting.place())
        daemon.start()
        try:
            daemon.reporting()
            for k in range(QUICK_CUTS if setting.minutes < 1.0 else CUTS):
                setting.say(f"cut {k + 1}")
                seconds.append(_cut(daemon, board))
        finally:
            daemon.kill()
    return [Line(budget="B11", what="hvhost cut, from the shell to the port, median", measured=median(seconds) * 1e3,
                 unit="ms", bound=150.0, against="the wall clock",
                 note=f"largest {max(seconds) * 1e3:.0f} ms of {len(seconds)}", raw={"seconds": seconds})]


def _cut(daemon: Daemon, board: Board) -> float:
    before = board.cuts
    begun = time.perf_counter()
    child = subprocess.Popen([sys.executable, "-m", "hvhost", "cut", "--socket", daemon.socket],
                             stdin=subprocess.DEVNULL, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
    at = board.wait_cut(before, CUT_S)
    child.wait(CUT_S)
    if at is None:
        raise CannotConnect("a cut at the port", "none", "speed B11")
    return at - begun
