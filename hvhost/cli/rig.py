"""A stand-in and a daemon as child processes in a private folder: what a demo and a rehearsal run against.

Only here may the press at the bench be simulated, because the port is one that this program made itself.
"""

import contextlib
import ctypes
import os
import shutil
import signal
import socket
import subprocess
import sys
import tempfile
import time
from collections.abc import Sequence
from pathlib import Path

from hvhost.words.errors import CannotConnect

START_S = 20.0
END_S = 30.0
PR_SET_PDEATHSIG = 1


def end_with_parent() -> None:
    """Ask the kernel to end this child when its parent dies, however it dies (Linux; elsewhere nothing happens)."""
    with contextlib.suppress(OSError, AttributeError):
        ctypes.CDLL(None).prctl(PR_SET_PDEATHSIG, signal.SIGTERM)


class Rig:
    """Both processes; leaving the context ends them and removes every socket."""

    def __init__(self, bench: Path, *, profile: str, seed: int, faults: Sequence[str] = (), runs: Path | None = None,
                 sets: Sequence[str] = ()) -> None:
        self.folder = Path(tempfile.mkdtemp(prefix="hvhost-"))
        self.socket, self.control = str(self.folder / "bench.sock"), str(self.folder / "standin.sock")
        self.truth = self.folder / "truth.jsonl"
        self._bench, self._profile, self._seed, self._faults, self._runs = bench, profile, seed, tuple(faults), runs
        self._sets = tuple(sets)
        self._children: list[subprocess.Popen[str]] = []

    def __enter__(self) -> "Rig":
        for number in (signal.SIGTERM, signal.SIGHUP):  # a closed terminal must not leave anything behind
            with contextlib.suppress(ValueError):
                signal.signal(number, _leave)
        try:
            device = self._start_standin()
            arguments = ["serve", str(self._bench), "--port", device, "--socket", self.socket, "--standin"]
            if self._runs is not None:
                arguments += ["--runs", str(self._runs)]
            self._start(arguments)
            self._wait_for_socket()
        except BaseException:
            self.close()
            raise
        return self

    def __exit__(self, *_: object) -> None:
        self.close()

    def close(self) -> None:
        """End the daemon (it lowers first), then the stand-in; remove the private folder."""
        for child in reversed(self._children):
            if child.poll() is None:
                child.send_signal(signal.SIGTERM)
                with contextlib.suppress(subprocess.TimeoutExpired):
                    child.wait(END_S)
            if child.poll() is None:
                child.kill()
                child.wait()
            if child.stdout is not None:
                child.stdout.close()
        self._children.clear()
        shutil.rmtree(self.folder, ignore_errors=True)

    def press(self) -> str:
        """Press the stand-in's arm input; returns its answer."""
        with socket.socket(socket.AF_UNIX, socket.SOCK_STREAM) as line:
            line.settimeout(5.0)
            line.connect(self.control)
            line.sendall(b"press 0.5\n")
            return line.recv(512).decode("utf-8", "replace").strip()

    def _start(self, arguments: list[str], *, piped: bool = False) -> subprocess.Popen[str]:
        log = (self.folder / f"{arguments[0]}.log").open("w")
        child = subprocess.Popen(
            [sys.executable, "-m", "hvhost", *arguments], stdin=subprocess.DEVNULL,
            stdout=subprocess.PIPE if piped else log, stderr=log, text=True, start_new_session=True,
            preexec_fn=end_with_parent,
            env={**os.environ, "PYTHONUNBUFFERED": "1"})
        log.close()
        self._children.append(child)
        return child

    def _start_standin(self) -> str:
        arguments = ["standin", "--profile", self._profile, "--seed", str(self._seed), "--pty", "--factory",
                     "--control", self.control, "--truth", str(self.truth)]
        for fault in self._faults:
            arguments += ["--fault", fault]
        for change in self._sets:
            arguments += ["--set", change]
        child = self._start(arguments, piped=True)
        assert child.stdout is not None
        for line in child.stdout:
            key, _, value = line.strip().partition(" ")
            if key == "port":
                return value
        raise CannotConnect("a stand-in", self._last_words("standin"), "rig")

    def _wait_for_socket(self) -> None:
        until_s = time.monotonic() + START_S
        while time.monotonic() < until_s:
            with socket.socket(socket.AF_UNIX, socket.SOCK_STREAM) as probe:
                if probe.connect_ex(self.socket) == 0:
                    return
            if self._children[-1].poll() is not None:
                break
            time.sleep(0.05)
        raise CannotConnect("a daemon", self._last_words("serve"), "rig")

    def _last_words(self, name: str) -> str:
        lines = (self.folder / f"{name}.log").read_text(errors="replace").strip().splitlines()
        return lines[-1] if lines else "it ended without a word"


def _leave(number: int, frame: object) -> None:
    raise SystemExit(128 + number)
