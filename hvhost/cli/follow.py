"""Follows a run from the shell: event lines as they come, a line of state now and then, Ctrl-C lowers, then cuts."""

import json
import select
import signal
import socket
import sys
import time
from collections.abc import Callable
from typing import Any

from hvhost.cli import exits
from hvhost.cli.talk import Bench, state_line
from hvhost.words.errors import CannotConnect, HvhostError

POLL_S = 0.2
STATE_EVERY_S = 5.0
OUTCOME_CODES = {"tripped": exits.TRIPPED, "interrupted": exits.INTERRUPTED, "record failed": exits.INTERRUPTED,
                 "lowered": exits.INTERRUPTED, "cut": exits.INTERRUPTED, "cancelled": exits.INTERRUPTED,
                 "failed": exits.FAILED}
VERDICT_CODES = {"pass": exits.PASSED, "fail": exits.FAILED, "not decided": exits.NOT_DECIDED}


class Follower:
    """Prints what happens to one run until its record is closed."""

    def __init__(self, bench: Bench, run: str, *, quiet: bool = False) -> None:
        self.bench, self.run, self.quiet = bench, run, quiet
        self.interrupts = 0
        self._woken: socket.socket  # readable after each Ctrl-C while following
        self._seen = 0
        self._state_s = 0.0

    def follow(self, begin: Callable[[], object] | None = None) -> dict[str, Any]:
        """Return the last status; raises `CannotConnect` when the daemon goes away.

        ``begin`` (the arm) is called with Ctrl-C caught already, so that none falls between it and the following.
        """
        self._woken, waker = socket.socketpair()
        self._woken.setblocking(False)
        waker.setblocking(False)
        before = signal.signal(signal.SIGINT, self._interrupted)
        wakeup_before = signal.set_wakeup_fd(waker.fileno(), warn_on_full_buffer=False)
        try:
            if begin is not None:
                begin()
            return self._follow()
        finally:
            signal.set_wakeup_fd(wakeup_before)
            signal.signal(signal.SIGINT, before)
            self._woken.close()
            waker.close()

    def _follow(self) -> dict[str, Any]:
        asked = 0
        while True:
            if self.interrupts > asked:
                asked = self.interrupts
                self._stop("lower" if asked == 1 else "cut")
            status = self.bench.status()
            self.show(status["snapshot"])
            if status["run"] != self.run:
                raise CannotConnect(f"run {self.run}", status["run"] or "no run", "daemon", "see 'hvhost runs'")
            if status["stage"] == "closed" and not status["recording"] and not status["closing"]:
                return status
            if status["stage"] == "prepared" and status["why"]:
                return status
            self._wait()

    def show(self, snapshot: dict[str, Any]) -> None:
        """Print event lines that are new, and a line of state every few seconds."""
        for event in snapshot.get("events", ()):
            if event["number"] > self._seen:
                self._seen = event["number"]
                if not self.quiet:
                    print(f"{_clock(event['utc_ns'])} {event['severity']:<9} {event['text']}", flush=True)
        now_s = time.monotonic()
        if not self.quiet and now_s - self._state_s >= STATE_EVERY_S:
            self._state_s = now_s
            print(f"{_clock(snapshot['utc_ns'])} {'state':<9} {state_line(snapshot)}", flush=True)

    def skip_old(self, snapshot: dict[str, Any]) -> None:
        """Forget what was said before this moment."""
        self._seen = max((event["number"] for event in snapshot.get("events", ())), default=0)

    def _wait(self) -> None:
        """Wait for the next look; Ctrl-C ends the wait, so that its stop waits for nothing."""
        ready, _, _ = select.select([self._woken], [], [], POLL_S)
        if ready:
            self._woken.recv(64)

    def _interrupted(self, number: int, frame: object) -> None:
        self.interrupts += 1

    def _stop(self, verb: str) -> None:
        words = "lowering; Ctrl-C once more cuts" if verb == "lower" else "cutting"
        print(f"hvhost: {words}", file=sys.stderr, flush=True)
        try:
            self.bench.call(verb)
        except HvhostError as error:
            print(f"hvhost: {verb} not confirmed: {error}; use the emergency switching off", file=sys.stderr)


def finish(status: dict[str, Any], as_json: bool) -> int:
    """Print how the run ended and return the exit code: the verdict's for a finished run, else the outcome's."""
    verdict = str(status.get("verdict", ""))
    word = verdict.partition(":")[0]
    code = VERDICT_CODES.get(word, exits.NOT_DECIDED)
    code = exits.REFUSED if status["stage"] == "prepared" else OUTCOME_CODES.get(status["outcome"], code)
    if as_json:
        print(json.dumps({"run": status["run"], "outcome": status["outcome"], "why": status["why"],
                          "verdict": verdict, "folder": status["folder"], "exit": code}))
    else:
        print(f"run {status['run']}: {status['outcome'] or status['stage']}: {status['why']}")
        if verdict:
            print(f"verdict: {verdict}")
        print(f"record: {status['folder']}")
    return code


def _clock(utc_ns: int) -> str:
    return time.strftime("%H:%M:%S", time.localtime(utc_ns / 1e9)) + f".{utc_ns // 100_000_000 % 10}"
