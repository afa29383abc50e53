"""``hvhost amend RUN``: a later correction of the run sheet, or what a breakdown was, as a revision."""

import argparse
import time

from hvhost.cli import exits
from hvhost.cli.runs import DEFAULT_ROOT, root_of
from hvhost.measure.result import evaluate
from hvhost.record.amend import SPELLINGS, BreakdownKind, amend, inspect_breakdown, revision_text
from hvhost.record.catalogue import find_run
from hvhost.record.data import load_run
from hvhost.record.folder import RunFolder
from hvhost.record.manifest import revisions_of
from hvhost.words.errors import CommandRefused, UsageFault

ABOUT = """Adds a revision to a closed run; nothing that is there is changed.
Either corrects fields of the run sheet: --field KEY=VALUE (as a run sheet writes it), with --reason;
or enters what a breakdown was, as whoever looked saw it: --breakdown N --kind KIND."""


def run(argv: list[str]) -> int:
    """Add one revision."""
    parser = argparse.ArgumentParser(prog="hvhost amend", description=ABOUT, epilog=exits.EPILOG,
                                     formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("run", metavar="RUN", help="a run's number, its folder's name, a unique beginning, or 'last'")
    parser.add_argument("--runs", default="", metavar="FOLDER", help=f"the runs folder (default: {DEFAULT_ROOT})")
    parser.add_argument("--as", dest="by", required=True, metavar="NAME", help="who says so; goes on the record")
    parser.add_argument("--field", action="append", default=[], metavar="KEY=VALUE",
                        help=f"one of {', '.join(SPELLINGS)}")
    parser.add_argument("--reason", default="", metavar="TEXT", help="why; needed for a field, a remark on a breakdown")
    parser.add_argument("--breakdown", type=int, default=0, metavar="N", help="its number on the page of the run")
    parser.add_argument("--kind", default="", metavar="KIND", help=f"one of {', '.join(BreakdownKind)}")
    options = parser.parse_args(argv)
    if bool(options.field) == bool(options.breakdown) or bool(options.kind) != bool(options.breakdown):
        raise UsageFault("--field KEY=VALUE, or --breakdown N with --kind KIND", "neither, both or a part", "amend")
    folder = find_run(root_of(options.runs), options.run)
    if options.field:
        amend(folder, _changes(options.field), reason=options.reason, by=options.by, utc_ns=time.time_ns())
    else:
        _inspect(folder, options)
    added = revisions_of(folder)[-1]
    print(f"{folder.name}: revision {added['number']}: {revision_text(added)}")
    return exits.PASSED


def _changes(fields: list[str]) -> dict[str, str]:
    changes: dict[str, str] = {}
    for field in fields:
        key, equals, value = field.partition("=")
        if not equals or key.strip() in changes:
            raise UsageFault("KEY=VALUE, each key once", repr(field)[:80], "--field")
        changes[key.strip()] = value.strip()
    return changes


def _inspect(folder: RunFolder, options: argparse.Namespace) -> None:
    found = evaluate(load_run(folder)).breakdowns
    if not 1 <= options.breakdown <= len(found):
        raise CommandRefused(f"a breakdown from 1 to {len(found)}" if found else "a run with a breakdown",
                             str(options.breakdown), folder.name, "'hvhost show' numbers them")
    inspect_breakdown(folder, options.breakdown, found[options.breakdown - 1].index, options.kind, by=options.by,
                      remark=options.reason, utc_ns=time.time_ns())
