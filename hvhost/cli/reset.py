"""``hvhost reset CAUSE...``: clear a latch by naming the whole set of its causes."""

import sys
import time

from hvhost.cli import exits
from hvhost.cli.talk import Bench, parser_of

ABOUT = """Clears the latch.  Every latched cause must be named, and no other; 'hvhost status' shows them.  The MCU
checks words, read-backs, readback and interlock before it obeys.  --grounded declares 'grounded by hand' where the
voltage cannot be measured after a cut; it goes on the record with your name.  Nothing is energised by a reset."""
ANSWER_S = 2.0


def run(argv: list[str]) -> int:
    """Ask for the reset and wait for the MCU's answer."""
    parser = parser_of("reset", ABOUT)
    parser.add_argument("causes", nargs="+", metavar="CAUSE")
    parser.add_argument("--grounded", action="store_true", help="declare: grounded by hand")
    options = parser.parse_args(argv)
    with Bench(options) as bench:
        bench.take_seat()
        ticket = bench.call("reset", causes=options.causes, grounded=options.grounded)["ticket_number"]
        until_s = time.monotonic() + ANSWER_S
        reply = ""
        while not reply and time.monotonic() < until_s:
            reply = bench.call("reply", ticket_number=ticket)["reply"]
            time.sleep(0.02)
    if reply == "ok":
        print("reset: latch cleared")
        return exits.PASSED
    print(f"reset: {reply or 'no answer from the MCU'}", file=sys.stderr)
    return exits.REFUSED
