"""``hvhost runs``: the catalogue of all runs, rebuilt from their folders."""

import argparse
import json
import time
from pathlib import Path

from hvhost.cli import exits
from hvhost.record.catalogue import RunSummary, list_runs
from hvhost.record.where import COLUMNS, where
from hvhost.words.errors import CommandRefused

DEFAULT_ROOT = "runs"
ABOUT = """Lists all runs, oldest first.
--where takes comparisons joined by 'and', 'or', 'not' and brackets, such as
  "verdict = fail and highest > 10 kV and opened >= 2027-01-15"
  "specimen ~ BU- and not outcome = finished"      (~ contains)
  "breakdown != none"                              (none: the run does not tell)
A date is midnight UTC.  Columns: """ + ", ".join(COLUMNS) + "."


def root_of(option: str) -> Path:
    """The folder of the runs; raises CommandRefused where one was named that is none."""
    root = Path(option or DEFAULT_ROOT).expanduser()
    if option and not root.is_dir():
        raise CommandRefused("a folder of runs", "a file" if root.exists() else "none", str(root), "see --runs")
    return root


def run(argv: list[str]) -> int:
    """Print one line a run."""
    parser = argparse.ArgumentParser(prog="hvhost runs", description=ABOUT, epilog=exits.EPILOG,
                                     formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--runs", default="", metavar="FOLDER", help=f"the runs folder (default: {DEFAULT_ROOT})")
    parser.add_argument("--where", default="", metavar="EXPR", help="only the runs that fit")
    parser.add_argument("--undelivered", action="store_true",
                        help="only the runs whose result is still to be handed over, with the last failure")
    parser.add_argument("--json", action="store_true", help="one JSON object a line")
    options = parser.parse_args(argv)
    fits = where(options.where) if options.where.strip() else lambda one: True
    root = root_of(options.runs)
    for one in list_runs(root):
        if fits(one) and (not options.undelivered or one.delivery == "due"):
            _tell(root, one, options)
    return exits.PASSED


def _tell(root: Path, one: RunSummary, options: argparse.Namespace) -> None:
    failure = ""
    if options.undelivered:
        from hvhost.publish.delivery import failure_of

        failure = failure_of(root, one.path.name)
    if options.json:
        print(json.dumps({**one.to_json, "delivery_failure": failure} if options.undelivered else one.to_json))
        return
    opened = time.strftime("%Y-%m-%d %H:%M:%S%z", time.localtime(one.opened_utc_ns / 1e9))
    highest = "" if one.highest_v is None else f"{one.highest_v / 1e3:.2f} kV"
    print(f"{one.run:<12} {opened}  {one.kind:<10} {one.specimen:<16} {one.outcome:<12} {highest:>9}  "
          f"{one.verdict or '-':<12} {one.plan}")
    if options.undelivered:
        print(f"    {failure or 'not tried yet'}")
