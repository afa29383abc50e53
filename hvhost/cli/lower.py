"""``hvhost lower``: ramp to zero at the down-slew, then cut."""

import argparse

from hvhost.cli import exits
from hvhost.cli.stopping import stop_all

HELP = "ramp to zero at the down-slew, then cut"
ABOUT = """Ramps the output to zero at the bench's down-slew and then cuts (stop category 1 of IEC 60204-1 where the
cut removes power).  It is no emergency stop, needs no seat, and nothing stops it but a cut.
Without --socket it goes to every bench whose daemon runs here."""


def run(argv: list[str]) -> int:
    """Send the stop and print what was answered; see :mod:`hvhost.cli.exits` for the codes."""
    parser = argparse.ArgumentParser(prog="hvhost lower", description=ABOUT, epilog=exits.EPILOG,
                                     formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--socket", default="", metavar="NAME", help="bench name or path of its control socket")
    parser.add_argument("--json", action="store_true", help="one JSON object a bench")
    options = parser.parse_args(argv)
    return stop_all("lower", options.socket, options.json)
