"""A bench of processes for one scenario: a stand-in in one, a daemon in another, both in a private folder.

Settings are the demonstration bench's with shorter bleed and rest times, so that a run closes within seconds.
Waiting is always for a condition and bounded; a scenario that waits too long says what for.
"""

import contextlib
import json
import os
import shutil
import signal
import socket
import subprocess
import sys
import tempfile
import threading
import time
from base64 import b64encode
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any

from hvhost.bench.file import load_bench
from hvhost.publish.client import Client
from hvhost.standin.eeprom import Eeprom, FileStore
from tests.process.judge import ENERGISED, Truth

CONFIGS = Path(__file__).parents[2] / "configs"
LEASE_S = 0.5
DOWN_SLEW = 13107  # words per second: 5 kV/s of 25 kV on 16 bits
LOWER_MAX_S = 10.0
LONG_S = 60.0  # for what takes a second on a free machine
POLL_S = 0.05  # between two looks; every judgement is made on the truth file's own ticks
SHORT_BLEED = (
    ("  time: 2 s   ", "  time: 400 ms   "),
    ("  times: 8\n", "  times: 6\n"),
    ("  resistance: 500 MΩ\n", "  resistance: 100 MΩ\n"),
    ("  rest: 500 ms\n", "  rest: 300 ms\n"),
)
PLAN = """\
plan: Scenario
{specimen}
released: {{by: laboratory lead, on: 2026-01-12}}
current_limit: 2 mA
{extra}
steps:
{steps}
acceptance:
  - {{{criterion}}}
"""
RAMP_THEN_HOLD = """\
  - ramp: {to: 8 kV, rate: 4 kV/s}
  - hold: {name: level, for: 60 s, at_most: 90 s, window: 500 ms}
"""
SLOW_RAMP = """\
  - ramp: {to: 4 kV, rate: 4 kV/s}
  - ramp: {to: 14 kV, rate: 500 V/s}
"""
QUICK = """\
  - ramp: {to: 5 kV, rate: 4 kV/s}
  - hold: {name: level, for: 1 s, at_most: 5 s, window: 200 ms}
"""
Condition = Callable[[], Any]


def wait(condition: Condition, what: str, seconds: float = LONG_S) -> Any:
    """Return what the condition gives once it is true; fails naming ``what`` after so many seconds."""
    until_s = time.monotonic() + seconds
    while not (found := condition()):
        assert time.monotonic() < until_s, f"waited {seconds:g} s for {what}"
        time.sleep(POLL_S)
    return found


def plan_text(steps: str, *, specimen: str = "", extra: str = "", criterion: str = "criterion: no breakdown") -> str:
    """A plan file with these steps."""
    return PLAN.format(steps=steps.rstrip(), specimen=specimen, extra=extra, criterion=criterion)


class Child:
    """A process of ours with its output in files; ended by its own id."""

    def __init__(self, folder: Path, name: str, arguments: list[str], env: Mapping[str, str] | None = None,
                 **options: Any) -> None:
        self.out_path, self.err_path = folder / f"{name}.out", folder / f"{name}.err"
        with self.out_path.open("wb") as out, self.err_path.open("wb") as err:
            self.process = subprocess.Popen(
                [sys.executable, "-m", "hvhost", *arguments], stdin=subprocess.DEVNULL, stdout=out, stderr=err,
                start_new_session=True, env={**os.environ, "PYTHONUNBUFFERED": "1", **(env or {})}, **options)
        self.name, self.pid = name, self.process.pid

    @property
    def out(self) -> str:
        """Standard output so far."""
        return self.out_path.read_text(errors="replace")

    @property
    def err(self) -> str:
        """Standard error so far."""
        return self.err_path.read_text(errors="replace")

    def signal(self, number: int) -> None:
        """Send a signal."""
        self.process.send_signal(number)

    def wait_end(self, seconds: float = LONG_S) -> int:
        """Wait for the end and return the exit code."""
        return self.process.wait(seconds)

    def kill(self) -> None:
        """kill -9, and wait."""
        if self.process.poll() is None:
            self.process.kill()
        self.process.wait()

    def end(self) -> None:
        """Ask to end, then kill."""
        if self.process.poll() is None:
            self.process.terminate()
            with contextlib.suppress(subprocess.TimeoutExpired):
                self.process.wait(20.0)
        self.kill()

    def end_all(self) -> None:
        """kill -9 of the process and of those that it started: what is left of a scenario interests nobody."""
        with contextlib.suppress(ProcessLookupError):
            os.killpg(self.pid, signal.SIGKILL)
        self.process.wait()


class Scene:
    """One bench of processes; see the module's text."""

    def __init__(self, *, profile: str = "demo", bench: str = "demo",
                 changes: tuple[tuple[str, str], ...] = SHORT_BLEED, commissioned: bool = True) -> None:
        self.folder = Path(tempfile.mkdtemp(prefix="hvt-"))
        self.profile, self.commissioned = profile, commissioned
        self.socket, self.control_path = str(self.folder / "d.sock"), str(self.folder / "s.sock")
        self.runs = self.folder / "runs"
        self.truth = Truth(self.folder / "truth.jsonl")
        self.bench_path = self.folder / "bench.yaml"
        text = (CONFIGS / f"{bench}.bench.yaml").read_text(encoding="utf-8")
        for old, new in changes:
            assert old in text, old
            text = text.replace(old, new)
        self.bench_path.write_text(text, encoding="utf-8")
        self.standin: Child | None = None
        self.daemon: Child | None = None
        self.device = ""
        self.run_id = ""
        self.arm_input = True
        self._children: list[Child] = []
        self._clients: list[Client] = []
        self._client: Client | None = None
        self._ticket = ""
        self._lock = threading.Lock()
        self._names = 0

    def __enter__(self) -> "Scene":
        return self

    def __exit__(self, *_: object) -> None:
        for client in self._clients:
            client.close()
        for child in reversed(self._children):
            child.end_all()
        shutil.rmtree(self.folder, ignore_errors=True)

    # ------------------------------------------------------------ processes

    def child(self, name: str, *arguments: str, **options: Any) -> Child:
        """Start ``hvhost ARGUMENTS`` in the background; ended with the scene."""
        self._names += 1
        made = Child(self.folder, f"{name}{self._names}", list(arguments), **options)
        self._children.append(made)
        return made

    def command(self, *arguments: str) -> Child:
        """Run ``hvhost ARGUMENTS`` to its end."""
        made = self.child(arguments[0], *arguments)
        made.wait_end()
        return made

    def start_standin(self, *arguments: str, tcp: bool = False, bleed: str = "100 MΩ") -> str:
        """Start the stand-in; returns its device."""
        eeprom = self.folder / "eeprom.bin"
        if self.commissioned and not eeprom.exists():
            Eeprom(load_bench(self.bench_path).settings(), FileStore(eeprom))
        line = ("--tcp", "127.0.0.1:0") if tcp else ("--pty",)
        self.standin = made = self.child(
            "standin", "standin", "--profile", self.profile, "--seed", "5", *line, "--eeprom", str(eeprom),
            "--set", f"supply.bleed_ohm={bleed}", "--control", self.control_path, "--truth", str(self.truth.path),
            *arguments)
        text = wait(lambda: ("truth " in made.out and made.out) or self._ended(made), "the stand-in's port")
        name = next(line.partition(" ")[2] for line in text.splitlines() if line.startswith("port "))
        self.device = f"tcp:{name}" if tcp else self._linked(name)
        wait(lambda: os.path.exists(self.control_path), "the control socket")
        return self.device

    def _linked(self, device: str) -> str:
        """A name of the scene's own: the system gives a pseudo-terminal's number to the next one that opens."""
        link = self.folder / "board"
        link.symlink_to(device)
        return str(link)

    def kill_standin(self) -> None:
        """kill -9 of the stand-in; its port's name goes with it."""
        (self.folder / "board").unlink(missing_ok=True)
        assert self.standin is not None
        self.standin.kill()

    def start_daemon(self, device: str = "", *arguments: str, **options: Any) -> Child:
        """Start the daemon and wait until it answers."""
        self.daemon = made = self.child("serve", "serve", str(self.bench_path), "--port", device or self.device,
                                        "--socket", self.socket, "--runs", str(self.runs), "--standin", *arguments,
                                        **options)
        wait(lambda: self._answers() or self._ended(made), "the daemon's socket")
        self._client, self._ticket = None, ""
        return made

    def _answers(self) -> bool:
        with socket.socket(socket.AF_UNIX, socket.SOCK_STREAM) as probe:
            return probe.connect_ex(self.socket) == 0

    @staticmethod
    def _ended(child: Child) -> bool:
        assert child.process.poll() is None, f"{child.name} ended with {child.process.returncode}: {child.err}"
        return False

    # ------------------------------------------------------------ talking

    def control(self, line: str) -> str:
        """One command on the stand-in's control socket; returns the answer behind 'ok'."""
        with socket.socket(socket.AF_UNIX, socket.SOCK_STREAM) as talk:
            talk.settimeout(20.0)
            talk.connect(self.control_path)
            talk.sendall(line.encode() + b"\n")
            answer = talk.recv(4096).decode().strip()
        assert answer.startswith("ok"), answer
        return answer[3:]

    def standin_status(self) -> dict[str, Any]:
        """True values now."""
        found = json.loads(self.control("status"))
        assert isinstance(found, dict)
        return found

    def client(self) -> Client:
        """A new connection to the daemon, closed with the scene."""
        made = Client.connect(self.socket)
        self._clients.append(made)
        return made

    def call(self, method: str, **params: Any) -> Any:
        """One request on the scene's own connection, with its seat's ticket."""
        with self._lock:
            if self._client is None:
                self._client = self.client()
            return self._client.call(method, {"as": "scenario", "ticket": self._ticket, **params}, 20.0)

    def snapshot(self) -> dict[str, Any]:
        """The newest snapshot."""
        return self.call("snapshot") or {}

    def status(self) -> dict[str, Any]:
        """The daemon's status."""
        found = self.call("status")
        assert isinstance(found, dict)
        return found

    def take_seat(self) -> None:
        """Take control for this connection."""
        self._ticket = self.call("seat.take")["ticket"]

    def said(self, text: str) -> bool:
        """Whether the daemon's events hold this text."""
        return any(text in event["text"] for event in self.status()["snapshot"]["events"])

    # ------------------------------------------------------------ acts

    def ready(self) -> None:
        """Greeted, in control, the latch of the boot cleared."""
        wait(lambda: self.snapshot().get("link") == "greeted" and self.snapshot().get("reading"), "the greeting")
        self.take_seat()
        latched = self.snapshot()["latched"]
        if latched:
            self.call("reset", causes=latched)
            wait(lambda: not self.status()["snapshot"]["latched"], "the reset")

    def open_run(self, plan: str, *, sheet: str = "", specimen: str = "S-1") -> str:
        """Open a run; returns its number."""
        params: dict[str, Any] = {"plan": b64encode(plan.encode()).decode(), "plan_file": "plan.yaml",
                                  "operator": "scenario", "reason": "scenario", "specimen": specimen,
                                  "repeat_of": "scenario"}
        if sheet:
            params |= {"sheet": b64encode(sheet.encode()).decode(), "sheet_file": "sheet.yaml"}
        opened = self.call("run", **params)
        self.run_id = str(opened["run"])
        return self.run_id

    def arm(self) -> None:
        """The first act of arming, and wait until the MCU waits for the second."""
        self.call("arm", typed=self.run_id)
        wait(lambda: self.status()["snapshot"]["permission"] != "idle", "the request")

    def energise(self, plan: str, **options: Any) -> None:
        """Open, arm, press, and wait until the output is on."""
        self.open_run(plan, **options)
        self.arm()
        if self.arm_input:
            self.control("press 0.4")
        wait(lambda: self.truth.last.get("mcu") == ENERGISED, "energised")

    def wait_volts(self, volts: float) -> None:
        """Wait until the true voltage is above this."""
        wait(lambda: self.standin_status()["v"] > volts, f"{volts:g} V")

    def wait_phase(self, phase: str) -> None:
        """Wait until the daemon reports this phase of a run."""
        wait(lambda: self.snapshot().get("phase") == phase, phase)

    def wait_outcome(self) -> dict[str, Any]:
        """Wait until it is settled how the run ended; its discharge and its record may still be followed."""
        found = wait(lambda: (s := self.status())["outcome"] and s, "an outcome")
        assert isinstance(found, dict)
        return found

    def wait_closed(self) -> dict[str, Any]:
        """Wait until the run's record is closed; returns the last status."""

        def closed() -> dict[str, Any] | None:
            status = self.status()
            done = status["stage"] == "closed" and not status["recording"] and not status["closing"]
            return status if done else None

        found = wait(closed, "the record's close", 90.0)
        assert isinstance(found, dict)
        return found

    # ------------------------------------------------------------ looking

    def tick_now(self) -> int:
        """The MCU's tick, at least as late as anything that happened before this call."""
        return int(self.standin_status()["tick"])

    def run_folder(self) -> Path:
        """The folder of the only run."""
        folders = [path for path in self.runs.iterdir() if path.is_dir()]
        assert len(folders) == 1, folders
        return folders[0]

    def result(self) -> dict[str, Any]:
        """The run's result, once a manifest closes it."""
        folder = self.run_folder()
        wait((folder / "manifest.sha256").exists, "the manifest")
        found = json.loads((folder / "result.json").read_text(encoding="utf-8"))
        assert isinstance(found, dict)
        return found
