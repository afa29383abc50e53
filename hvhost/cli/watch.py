"""``hvhost watch``: the screen, a process of its own; plain lines where standard output is no terminal."""

import argparse
import os
import sys

from hvhost.cli import exits
from hvhost.words.errors import HvhostError

HELP = "show the bench: readbacks, state, trend, interlocks, events; keys lower and cut"
ABOUT = """Shows the bench until q is pressed.  SPACE or c cuts at once, l lowers to zero; neither needs the seat.
Leaving the view stops nothing.  Without a terminal it prints lines, and cannot stop."""


def run(argv: list[str]) -> int:
    """Show the screen, lines, or one status; see :mod:`hvhost.cli.exits` for the codes."""
    parser = argparse.ArgumentParser(prog="hvhost watch", description=ABOUT, epilog=exits.EPILOG,
                                     formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--socket", default="", metavar="NAME", help="bench name or path of its control socket")
    parser.add_argument("--once", action="store_true", help="print the present status and end")
    parser.add_argument("--plain", action="store_true", help="lines instead of the screen")
    options = parser.parse_args(argv)
    from hvhost.publish.places import one_socket
    from hvhost.publish.screen import show_lines, show_once, show_screen
    try:
        path = one_socket(options.socket)
        if options.once:
            show_once(path, sys.stdout)
        elif options.plain or not sys.stdout.isatty():
            return exits.PASSED if show_lines(path, sys.stdout) else exits.CANNOT_CONNECT
        else:
            show_screen(path)
    except HvhostError as fault:
        print(f"watch: {fault}", file=sys.stderr)
        return fault.exit_code
    except BrokenPipeError:
        # the reader of our lines is gone; keep the interpreter from complaining about it at its end
        os.dup2(os.open(os.devnull, os.O_WRONLY), 1)
    return exits.PASSED
