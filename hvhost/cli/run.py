"""``hvhost run PLAN``: preflight, record, arm, follow to the verdict."""

import argparse
import contextlib
import sys
from base64 import b64encode
from pathlib import Path
from typing import Any

from hvhost.cli import exits
from hvhost.cli.follow import Follower, finish
from hvhost.cli.talk import Bench, parser_of
from hvhost.words.errors import FileFault, HvhostError, UsageFault

ABOUT = """Has the plan and the run sheet checked against the bench, opens the record, asks for the arm and follows the
run until its record is closed.  Arming takes two acts: this command, then the press at the bench outside the danger
zone (a bench without that input asks for the run's name to be typed).
Ctrl-C lowers first and says so; a second one cuts."""


def run(argv: list[str]) -> int:
    """Carry out one plan run; returns the verdict's exit code."""
    parser = parser_of("run", ABOUT)
    parser.add_argument("plan", metavar="PLAN")
    parser.add_argument("--specimen", default="", metavar="ID")
    parser.add_argument("--sheet", default="", metavar="FILE")
    parser.add_argument("--operator", default="")
    parser.add_argument("--value", action="append", default=[], metavar="NAME=QUANTITY", help="a plan parameter")
    parser.add_argument("--reason", default="", help="for findings that need one; goes on the record with your name")
    parser.add_argument("--repeat-of", default="", metavar="TEXT", help="why a used specimen ID is used again")
    parser.add_argument("--prepare", action="store_true", help="open the run but leave the arming to 'hvhost arm'")
    parser.add_argument("--quiet", action="store_true", help="print the end only")
    parser.add_argument("--json", action="store_true")
    options = parser.parse_args(argv)
    params = request_of(options)
    with Bench(options) as bench:
        bench.take_seat()
        opened = bench.call("run", **params)
        if not options.json:
            tell_opened(opened)
        if options.prepare:
            print("prepared: arm it with 'hvhost arm'", file=sys.stderr)
            return exits.PASSED
        return arm_and_follow(bench, opened["run"], options)


def request_of(options: argparse.Namespace) -> dict[str, Any]:
    """Read the files and ask for what is missing; the daemon is sent texts, never paths."""
    path = Path(options.plan)
    params: dict[str, Any] = {"plan": read(path), "plan_file": path.name, "operator": options.operator,
                              "reason": options.reason, "repeat_of": options.repeat_of}
    if options.sheet:
        sheet = Path(options.sheet)
        return {**params, "sheet": read(sheet), "sheet_file": sheet.name, "specimen": options.specimen}
    specimen = options.specimen
    if not specimen:
        if not sys.stdin.isatty():
            raise UsageFault("--specimen ID or --sheet FILE", "neither", "run")
        specimen = input("specimen ID: ").strip()
    values = {}
    for item in options.value:
        name, equals, value = item.partition("=")
        if not equals:
            raise UsageFault("NAME=QUANTITY", repr(item), "--value")
        values[name.strip()] = value.strip()
    return {**params, "specimen": specimen, "values": values}


def read(path: Path) -> str:
    """The text of a file as base64, which keeps a request on one line; raises `FileFault` naming the file."""
    try:
        return b64encode(path.read_text(encoding="utf-8").encode("utf-8")).decode("ascii")
    except (OSError, UnicodeDecodeError) as error:
        raise FileFault("a readable text file", getattr(error, "strerror", None) or str(error), str(path)) from None


def tell_opened(opened: dict[str, Any]) -> None:
    """Say what would be armed."""
    for finding in opened["findings"]:
        print(finding, file=sys.stderr)
    print(f"run {opened['run']}: {opened['title']}, specimen {opened['specimen']}, up to "
          f"{opened['v_highest'] / 1e3:g} kV, at most {opened['duration_s']:.0f} s", flush=True)


def arm_and_follow(bench: Bench, run_id: str, options: argparse.Namespace, *, keep: bool = False) -> int:
    """The first act of arming, then follow to the close; a run that was not armed is cancelled, unless to ``keep``."""
    follower = Follower(bench, run_id, quiet=options.quiet or options.json)
    armed = False

    def arm() -> None:
        nonlocal armed
        bench.call("arm", typed=typed)
        armed = True

    try:
        status = bench.status()
        follower.skip_old(status["snapshot"])
        typed = "" if status["arm_input"] else ask_name(run_id)
        ended = follower.follow(arm)
    except (HvhostError, KeyboardInterrupt):
        if not armed and not keep:
            cancel(bench)
        raise
    if ended["stage"] == "prepared" and not keep:  # the MCU refused
        cancel(bench)
    return finish(ended, options.json)


def ask_name(run_id: str) -> str:
    """The first act where the bench has no arm input: the run's name, typed."""
    print(f"no arm input on this bench; type the run's name to arm ({run_id}): ", end="", file=sys.stderr, flush=True)
    try:
        return input().strip()
    except EOFError:
        raise UsageFault(f"the run's name typed: {run_id}", "the end of the input", "arm",
                         "this bench has no arm input: arm it from a terminal") from None


def cancel(bench: Bench) -> None:
    """Leave no prepared run behind."""
    with contextlib.suppress(HvhostError):
        print(f"hvhost: not armed, so the run {bench.call('cancel')['cancelled']} is cancelled", file=sys.stderr)
