"""``hvhost replay RUN``: the record back through the same core."""

import argparse
import json
from collections.abc import Mapping

from hvhost.cli import exits
from hvhost.cli.runs import DEFAULT_ROOT, root_of
from hvhost.record.catalogue import find_run
from hvhost.record.replay import replay

ABOUT = """Gives every recorded input to a fresh core and compares its verdicts and the lines it sends with the
record's.  Passed where they are the same; failed where they part, and it says at which sample."""


def run(argv: list[str]) -> int:
    """Replay one run."""
    parser = argparse.ArgumentParser(prog="hvhost replay", description=ABOUT, epilog=exits.EPILOG)
    parser.add_argument("run", metavar="RUN")
    parser.add_argument("--runs", default="", metavar="FOLDER", help=f"the runs folder (default: {DEFAULT_ROOT})")
    parser.add_argument("--json", action="store_true")
    options = parser.parse_args(argv)
    found = replay(find_run(root_of(options.runs), options.run))
    if options.json:
        print(json.dumps({"inputs": found.inputs, "blocks": found.blocks, "pairs": found.pairs,
                          "verdicts": found.verdicts, "parted": found.parted, "damage": found.damage,
                          "interfering": dict(found.interfering),
                          "interfering_recorded": found.interfering_recorded}))
    else:
        print(f"{found.inputs} inputs, {found.pairs} pairs, {found.verdicts} verdicts")
        if found.interfering or found.interfering_recorded:
            print(f"interfering samples: {_counts(found.interfering)}"
                  + ("" if found.interfering == (found.interfering_recorded or found.interfering)
                     else f"; the record counted {_counts(found.interfering_recorded or {})}"))
        if found.damage:
            print(f"{found.damage} damaged places in the record were passed over")
        print(f"parted {found.parted}" if found.parted else "same verdicts at the same samples, same lines sent")
    return exits.FAILED if found.parted else exits.PASSED


def _counts(counts: Mapping[str, int]) -> str:
    return ", ".join(f"{rule} {count}" for rule, count in counts.items()) or "none"
