"""``hvhost deliver BENCH``: hand over the results that are due, without waiting for the daemon."""

import argparse
import sys
from pathlib import Path

from hvhost.cli import exits
from hvhost.words.errors import CommandRefused

ABOUT = """Hands over every result that is due, as the bench file's section 'archive' says: one CSV file a run, whole,
then the command.  The daemon does the same by itself; this tries at once what failed before.
'hvhost runs --undelivered' lists what is due and why it failed."""


def run(argv: list[str]) -> int:
    """Deliver once; the exit code says whether all went over."""
    parser = argparse.ArgumentParser(prog="hvhost deliver", description=ABOUT, epilog=exits.EPILOG)
    parser.add_argument("bench", metavar="BENCH")
    parser.add_argument("--runs", default="", metavar="FOLDER", help="instead of the bench file's runs folder")
    options = parser.parse_args(argv)
    from hvhost.bench.file import load_bench
    from hvhost.publish.delivery import deliver_due

    bench = load_bench(Path(options.bench))
    if bench.archive is None:
        raise CommandRefused("a bench file with a section 'archive'", "none", options.bench,
                             "name the folder for results there")
    root = Path(options.runs) if options.runs else Path(bench.runs_folder).expanduser()
    outcome = deliver_due(root, bench.archive, forced=True)
    for name in outcome.done:
        print(f"{name}: handed over")
    for name, text in outcome.failed.items():
        print(f"{name}: {text}", file=sys.stderr)
    if not outcome.done and not outcome.failed:
        print("nothing is due")
    return exits.INTERRUPTED if outcome.failed else exits.PASSED
