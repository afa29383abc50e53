"""``hvhost speed``: the budgets measured on this machine, each beside what it is compared with."""

import argparse
import json
import os
import platform
import sys
import tempfile
import time
from pathlib import Path

from hvhost.cli import exits
from hvhost.cli.demo import examples

ABOUT = """Measures the budgets on this machine: B1 path, B2 trip, B3 stops by every way in, B4 loop, B5 processor,
B6 memory, B7 guard, B8 record, B9 rehearsal, B11 start and cut, B14 restart.  Where a ratio can be had both sides are
run in turn, by blocks, in one process, and medians are compared, so that other work on the machine weighs on both.
Nothing here is energised: MCU, supply and specimen are software.  B4, B5 and B6 watch a daemon for ten minutes
(--minutes 60 judges them); with --quick everything is shorter, and the output says which figures that concerns.
The exit code is 0 when every bound holds, else 1."""
MINUTES, QUICK_MINUTES = 10.0, 0.25
QUICK_BLOCKS = 20
QUIET_S = 2.0  # nothing is said before this, and not more often than every half second


def run(argv: list[str]) -> int:
    """Measure and print; 0 when every bound holds, 1 otherwise."""
    parser = argparse.ArgumentParser(prog="hvhost speed", description=ABOUT, epilog=exits.EPILOG,
                                     formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--only", default="", metavar="B1,B2", help="these budgets only")
    parser.add_argument("--quick", action="store_true", help="shorter where that is possible")
    parser.add_argument("--minutes", type=float, default=0.0, metavar="M",
                        help="how long B4, B5 and B6 watch a daemon: an hour judges them")
    parser.add_argument("--json", action="store_true", help="the same with the raw figures, as one JSON object")
    options = parser.parse_args(argv)
    if not 0.0 <= options.minutes <= 1440.0:
        parser.error("--minutes: expected at most 1440")
    from hvhost.speed.budgets import chosen, measure
    from hvhost.speed.setting import Setting
    from hvhost.speed.table import table

    budgets = chosen(options.only)
    teller = Teller()
    begun = time.monotonic()
    with tempfile.TemporaryDirectory(prefix="hvhost-speed-") as folder:
        setting = Setting(bench=examples() / "demo.bench.yaml", folder=Path(folder), say=teller.say,
                          minutes=options.minutes or (QUICK_MINUTES if options.quick else MINUTES))
        lines = measure(setting, budgets)
    teller.end()
    held = all(line.within for line in lines)
    if options.json:
        print(json.dumps({"machine": machine(), "quick": options.quick, "seconds": time.monotonic() - begun,
                          "held": held, "lines": [line.to_json() for line in lines]}, allow_nan=False))
    else:
        print(table(lines, machine=machine() + ("; shortened by --quick" if options.quick else "")))
    return exits.PASSED if held else 1


def machine() -> str:
    """What was measured on, in a line."""
    load = os.getloadavg()[0]
    return (f"{platform.system()} {platform.release()}, {os.cpu_count()} processors, Python "
            f"{platform.python_version()}, load {load:.1f}")


class Teller:
    """Says on standard error what is going on, once it takes longer than two seconds."""

    def __init__(self) -> None:
        self._begun = self._said = time.monotonic()
        self._live = sys.stderr.isatty()
        self._width = 0

    def say(self, text: str) -> None:
        """Show this, in place where that is possible, now and then otherwise."""
        now = time.monotonic()
        pause = 0.2 if self._live else 5.0
        if now - self._begun < QUIET_S or now - self._said < pause:
            return
        self._said = now
        end = "" if self._live else "\n"
        line = f"hvhost speed: {text}"
        print(("\r" if self._live else "") + line.ljust(self._width if self._live else 0), end=end, file=sys.stderr,
              flush=True)
        self._width = len(line)

    def end(self) -> None:
        """Leave the line."""
        if self._live and self._width:
            print("\r" + " " * self._width + "\r", end="", file=sys.stderr, flush=True)
