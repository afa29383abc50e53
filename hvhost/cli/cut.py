"""``hvhost cut``: cut the output at once, by every means the bench has."""

import argparse

from hvhost.cli import exits
from hvhost.cli.stopping import stop_all

HELP = "cut the output at once, by every means the bench has"
ABOUT = """Cuts at once: inhibit, clear, zero words, power relay - whichever the bench has.  It needs no seat, waits
behind nothing, and is confirmed only by the board's answer and a later block with every read-back in its cut
position.  The emergency switching off does not depend on it.
Without --socket it goes to every bench whose daemon runs here."""


def run(argv: list[str]) -> int:
    """Send the stop and print what was answered; see :mod:`hvhost.cli.exits` for the codes."""
    parser = argparse.ArgumentParser(prog="hvhost cut", description=ABOUT, epilog=exits.EPILOG,
                                     formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--socket", default="", metavar="NAME", help="bench name or path of its control socket")
    parser.add_argument("--json", action="store_true", help="one JSON object a bench")
    options = parser.parse_args(argv)
    return stop_all("cut", options.socket, options.json)
