"""A rehearsal in real time: stand-in and daemon as processes, the run from here, the press simulated."""

import argparse
import sys
import threading
import time
from pathlib import Path

from hvhost.bench.model import Bench
from hvhost.cli.rig import Rig
from hvhost.publish.client import Client
from hvhost.standin.params import PROFILES
from hvhost.words.errors import HvhostError, UsageFault

POLL_S = 0.1
PREPARE_S = 10.0


def rehearse_live(bench: Bench, options: argparse.Namespace, seed: int, runs: Path) -> int:
    """Rehearse in real time; returns the run's exit code."""
    profile = options.profile or bench.name
    if profile not in PROFILES:
        raise UsageFault(f"--profile, one of {', '.join(PROFILES)}", repr(profile), "rehearse",
                         "a stand-in in real time is one of these; --fast fits any bench file")
    arguments = [options.plan, "--operator", options.operator, "--reason", options.reason]
    for name, value in (("--sheet", options.sheet), ("--specimen", options.specimen)):
        arguments += [name, value] if value else []
    for value in options.value:
        arguments += ["--value", value]
    arguments += ["--quiet"] if options.quiet else []
    arguments += ["--json"] if options.json else []
    with Rig(Path(options.bench), profile=profile, seed=seed, faults=options.faults, runs=runs,
             sets=options.changes) as rig:
        clear_boot_latch(rig)
        done = threading.Event()
        presser = threading.Thread(target=press_when_asked, args=(rig, done), daemon=True)
        presser.start()
        try:
            from hvhost.cli.run import run

            return run([*arguments, "--socket", rig.socket, "--as", "rehearsal"])
        finally:
            done.set()
            presser.join(5.0)


def clear_boot_latch(rig: Rig) -> None:
    """Wait for the greeting and clear the latch that every boot leaves."""
    until_s = time.monotonic() + PREPARE_S
    with Client.connect(rig.socket) as bench:
        ticket = bench.call("seat.take", {"as": "rehearsal"})["ticket"]
        asked = False
        while time.monotonic() < until_s:
            shot = bench.call("snapshot") or {}
            latched = shot.get("latched") or []
            if shot.get("link") == "greeted" and shot.get("reading"):
                if not latched:
                    return
                if not asked:
                    asked = True
                    bench.call("reset", {"ticket": ticket, "causes": latched, "as": "rehearsal"})
            elif shot.get("link") == "observe only":
                return
            time.sleep(POLL_S)


def press_when_asked(rig: Rig, done: threading.Event) -> None:
    """Press the stand-in's arm input once for each open request."""
    pressed_once = False
    try:
        with Client.connect(rig.socket) as bench:
            pressed = False
            while not done.wait(POLL_S):
                shot = bench.call("snapshot") or {}
                requested = shot.get("permission") == "requested"
                if requested and not pressed:
                    rig.press()
                    pressed_once = True
                pressed = requested
    except (HvhostError, OSError) as error:
        if not pressed_once and not done.is_set():
            print(f"hvhost: the press could not be simulated: {error}", file=sys.stderr)
