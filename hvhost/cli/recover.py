"""``hvhost recover``: close runs that nothing closed; the original stays as it was found."""

import argparse
import time

from hvhost.cli import exits
from hvhost.cli.runs import DEFAULT_ROOT, root_of
from hvhost.record.catalogue import find_run, unclosed
from hvhost.report.closing import recover_and_close


def run(argv: list[str]) -> int:
    """Recover the named runs, or all that are open."""
    parser = argparse.ArgumentParser(prog="hvhost recover", epilog=exits.EPILOG,
                                     description="Closes runs that a crash left open, as interrupted.")
    parser.add_argument("run", nargs="*", metavar="RUN", help="default: every run that nothing closed")
    parser.add_argument("--runs", default="", metavar="FOLDER", help=f"the runs folder (default: {DEFAULT_ROOT})")
    options = parser.parse_args(argv)
    root = root_of(options.runs)
    folders = [find_run(root, name) for name in options.run] if options.run else unclosed(root)
    for folder in folders:
        closed = recover_and_close(folder, utc_ns=time.time_ns())
        if closed is None:
            print(f"{folder.name}: closed already")
        else:
            print(f"{folder.name}: {closed.result.outcome}, {closed.result.pairs} pairs, "
                  f"{closed.result.entries_lost} entries lost")
    if not folders:
        print("no run is open")
    return exits.PASSED
