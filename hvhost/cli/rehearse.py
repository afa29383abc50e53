"""``hvhost rehearse BENCH PLAN``: a run against a stand-in made to the bench file's measure."""

import argparse
import json
import secrets
import sys
from datetime import UTC, datetime
from pathlib import Path

from hvhost.bench.file import load_bench
from hvhost.bench.model import Bench
from hvhost.cli import exits
from hvhost.cli.outfile import open_output
from hvhost.cli.run import request_of
from hvhost.words.errors import UsageFault

ABOUT = """Runs a plan against a stand-in made to the bench file's measure, with a record marked as a rehearsal.  With
--fast the same core runs under a virtual clock, and bench, plan, sheet, faults, seed and date decide every byte.
The press at the bench is simulated: the port is one that this command made itself."""
LONGEST_S = 100 * 3600.0


def run(argv: list[str]) -> int:
    """Rehearse once; the exit code is that of a run."""
    parser = argparse.ArgumentParser(prog="hvhost rehearse", description=ABOUT, epilog=exits.EPILOG,
                                     formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("bench", metavar="BENCH")
    parser.add_argument("plan", metavar="PLAN")
    parser.add_argument("--sheet", default="", metavar="FILE")
    parser.add_argument("--specimen", default="", metavar="ID")
    parser.add_argument("--operator", default="rehearsal")
    parser.add_argument("--value", action="append", default=[], metavar="NAME=QUANTITY", help="a plan parameter")
    parser.add_argument("--reason", default="rehearsal", help="for findings that need one")
    parser.add_argument("--repeat-of", default="rehearsal", metavar="TEXT", help=argparse.SUPPRESS)
    parser.add_argument("--fast", action="store_true", help="under a virtual clock")
    parser.add_argument("--seed", type=int, default=None, metavar="N", help="drawn and printed if absent")
    parser.add_argument("--profile", default="", help="whose specimen: demo, gap, small (default: the bench's name)")
    parser.add_argument("--set", action="append", default=[], metavar="KEY=VALUE", dest="changes",
                        help="change the plant, as in 'specimen.strength_v=12 kV'")
    parser.add_argument("--fault", action="append", default=[], metavar="NAME", dest="faults",
                        help="a fault by name (see 'hvhost standin --help'); may be given again")
    parser.add_argument("--date", default="", metavar="YYYY-MM-DD", help="virtual day of --fast (default: today)")
    parser.add_argument("--runs", default="", metavar="FOLDER", help="default: rehearsals/<time> in the runs folder")
    parser.add_argument("--truth", default="", metavar="FILE", help="what really happened, as JSON lines (--fast)")
    parser.add_argument("--quiet", action="store_true")
    parser.add_argument("--json", action="store_true")
    options = parser.parse_args(argv)
    seed = options.seed if options.seed is not None else secrets.randbits(32)
    bench = load_bench(Path(options.bench))
    if not options.json:
        print(f"seed {seed}", flush=True)
    runs = Path(options.runs) if options.runs else (
        Path(bench.runs_folder).expanduser() / "rehearsals" / datetime.now(UTC).strftime("%Y%m%dT%H%M%S.%fZ"))
    if options.fast:
        return _fast(bench, options, seed, runs)
    from hvhost.cli.live import rehearse_live

    return rehearse_live(bench, options, seed, runs)


def _fast(bench: Bench, options: argparse.Namespace, seed: int, runs: Path) -> int:
    from hvhost.cli.fast import FastRehearsal
    from hvhost.cli.plantof import plant_of
    from hvhost.standin.params import PROFILES, changed
    from hvhost.standin.truth import TruthLog

    try:
        day = datetime.strptime(options.date, "%Y-%m-%d") if options.date else datetime.combine(
            datetime.now(UTC).date(), datetime.min.time())
    except ValueError:
        raise UsageFault("YYYY-MM-DD", repr(options.date), "--date") from None
    profile = options.profile or (bench.name if bench.name in PROFILES else "demo")
    if profile not in PROFILES:
        raise UsageFault(f"one of {', '.join(PROFILES)}", repr(profile), "--profile")
    plant = changed(plant_of(bench, PROFILES[profile]()), options.changes)
    say = (lambda text: None) if options.quiet or options.json else (lambda text: print(text, flush=True))
    file = open_output(Path(options.truth)) if options.truth else None
    try:
        rehearsal = FastRehearsal(bench, plant, seed=seed, runs=runs, day=day, faults=options.faults, say=say,
                                  truth=TruthLog(file.write, tick_hz=10_000) if file else None)
        rehearsal.prepare()
        done = rehearsal.run(request_of(options), LONGEST_S)
    finally:
        if file is not None:
            file.close()
    status = done.status
    from hvhost.cli.follow import finish

    if not options.json:
        print(f"{done.virtual_s:.1f} s rehearsed in {done.wall_s:.2f} s ({done.virtual_s / done.wall_s:.0f} times real "
              f"time), {done.pairs} pairs; closing the record {done.close_s:.2f} s", file=sys.stderr)
    else:
        print(json.dumps({"seed": seed, "virtual_s": done.virtual_s, "wall_s": done.wall_s, "close_s": done.close_s,
                          "pairs": done.pairs}))
    return finish(status, options.json)
