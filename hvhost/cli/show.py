"""``hvhost show RUN``: one run as a page, its files checked against their hashes."""

import argparse
import json

from hvhost.cli import exits
from hvhost.cli.runs import DEFAULT_ROOT, root_of
from hvhost.measure.result import evaluate
from hvhost.record.catalogue import find_run
from hvhost.record.data import load_run
from hvhost.record.manifest import revisions_of
from hvhost.report.closing import page_of
from hvhost.report.resultfile import result_document

VERDICT_CODES = {"pass": exits.PASSED, "fail": exits.FAILED, "not decided": exits.NOT_DECIDED}


def run(argv: list[str]) -> int:
    """Print the page; the exit code is the verdict's."""
    parser = argparse.ArgumentParser(prog="hvhost show", epilog=exits.EPILOG,
                                     description="Shows one run, computed anew from its record.")
    parser.add_argument("run", metavar="RUN", help="a run's number, its folder's name, or the folder")
    parser.add_argument("--runs", default="", metavar="FOLDER", help=f"the runs folder (default: {DEFAULT_ROOT})")
    parser.add_argument("--json", action="store_true")
    options = parser.parse_args(argv)
    folder = find_run(root_of(options.runs), options.run)
    run = load_run(folder)
    result = evaluate(run)
    if options.json:
        print(json.dumps(result_document(run.meta, result, revisions_of(folder)), ensure_ascii=False))
    else:
        print(page_of(folder), end="")
    return VERDICT_CODES[result.verdict.value]
