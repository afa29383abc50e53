"""``hvhost diagnose BENCH``: whether this machine, its port and what the bench names are fit, before it matters."""

import argparse
import json
from collections.abc import Iterator
from pathlib import Path

from hvhost.bench.file import load_bench
from hvhost.bench.model import Bench
from hvhost.cli import exits
from hvhost.cli.diagnose_lines import check_board, check_broker, check_daemon, check_port
from hvhost.cli.diagnose_machine import check_clock, check_disk, check_loop, check_realtime, check_versions
from hvhost.cli.diagnosis import Check, Verdict, ok

ABOUT = """Looks at everything that a daemon of this bench needs and says what is missing, with the remedy: versions,
clock and its synchronisation, disk, real-time permission, how long this machine's event loop stands still beside the
lease, the port and who may open it, the board behind it and its settings, the broker where the bench file names one.
The board is greeted only where no daemon serves the bench; a greeting lowers what an earlier session left energised.
Exit code 0 where nothing hinders the bench (what wants attention is told), 1 where something does."""
LOOP_S = 3.0


def run(argv: list[str]) -> int:
    """Look, tell, and say by the code whether anything hinders."""
    parser = argparse.ArgumentParser(prog="hvhost diagnose", description=ABOUT, epilog=exits.EPILOG,
                                     formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("bench", metavar="BENCH")
    parser.add_argument("--port", default="", metavar="DEVICE", help="instead of the bench file's port")
    parser.add_argument("--socket", default="", metavar="PATH", help="instead of the bench's own control socket")
    parser.add_argument("--runs", default="", metavar="FOLDER", help="instead of the bench file's runs folder")
    parser.add_argument("--no-board", action="store_true", help="do not open the port")
    parser.add_argument("--seconds", type=float, default=LOOP_S, metavar="S", help="how long the loop is watched")
    parser.add_argument("--json", action="store_true", help="one JSON object")
    options = parser.parse_args(argv)
    if not 0.0 < options.seconds <= 3600.0:
        parser.error("--seconds: expected more than 0, at most 3600")
    bench = load_bench(Path(options.bench))
    found = []
    for check in look(bench, options):
        found.append(check)
        if not options.json:
            print(check.text, flush=True)
    hindered = any(check.verdict is Verdict.FAULT for check in found)
    if options.json:
        print(json.dumps({"bench": bench.name, "hindered": hindered, "checks": [check.to_json() for check in found]}))
    return exits.FAILED if hindered else exits.PASSED


def look(bench: Bench, options: argparse.Namespace) -> Iterator[Check]:
    """Every check, cheap ones first."""
    device = options.port or bench.port.device
    yield ok("bench file", f"{bench.file}: {bench.title}")
    yield from check_versions()
    yield check_clock()
    yield from check_disk(bench, Path(options.runs or bench.runs_folder).expanduser())
    yield check_realtime()
    daemon, served = check_daemon(bench, options.socket)
    yield daemon
    on_the_port = list(check_port(device))
    yield from on_the_port
    if not served and not options.no_board and not any(one.verdict is Verdict.FAULT for one in on_the_port):
        yield from check_board(bench, device)
    yield from check_broker(bench)
    yield check_loop(bench, options.seconds)
