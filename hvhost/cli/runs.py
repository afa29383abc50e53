"""``hvhost runs``: the catalogue of all runs, rebuilt from their folders."""

import argparse
import json
import time
from pathlib import Path

from hvhost.cli import exits
from hvhost.record.catalogue import list_runs

DEFAULT_ROOT = "runs"


def root_of(option: str) -> Path:
    """The folder of the runs."""
    return Path(option or DEFAULT_ROOT).expanduser()


def run(argv: list[str]) -> int:
    """Print one line a run."""
    parser = argparse.ArgumentParser(prog="hvhost runs", description="Lists all runs, oldest first.",
                                     epilog=exits.EPILOG)
    parser.add_argument("--runs", default="", metavar="FOLDER", help=f"the runs folder (default: {DEFAULT_ROOT})")
    parser.add_argument("--json", action="store_true")
    options = parser.parse_args(argv)
    for one in list_runs(root_of(options.runs)):
        if options.json:
            print(json.dumps(one.to_json))
            continue
        opened = time.strftime("%Y-%m-%d %H:%M:%S%z", time.localtime(one.opened_utc_ns / 1e9))
        highest = "" if one.highest_v is None else f"{one.highest_v / 1e3:.2f} kV"
        print(f"{one.run:<12} {opened}  {one.kind:<10} {one.specimen:<16} {one.outcome:<12} {highest:>9}  "
              f"{one.verdict or '-':<12} {one.plan}")
    return exits.PASSED
