"""``hvhost watch``: the screen, a process of its own; plain lines where standard output is no terminal."""

import argparse
import os
import sys

from hvhost.cli import exits
from hvhost.words.errors import HvhostError

HELP = "show the bench: readbacks, state, trend, interlocks, events; keys lower and cut"
ABOUT = """Shows the bench until q is pressed.  SPACE or c cuts at once, l lowers to zero; neither needs the seat.
t changes the plot (whole run with what is still to come, last minute, last arc or trip), b switches the bell.
Leaving the view stops nothing.  Without a terminal it prints lines, and cannot stop.

With --bench-display it is the page for the display beside the arm input: while a request to energise is open it shows
plan, specimen, highest voltage, duration, who asked and the time left; it cannot arm."""
PLOTS = {"run": "RUN", "minute": "MINUTE", "arc": "EVIDENCE"}


def run(argv: list[str]) -> int:
    """Show the screen, lines, or one status; see :mod:`hvhost.cli.exits` for the codes."""
    parser = argparse.ArgumentParser(prog="hvhost watch", description=ABOUT, epilog=exits.EPILOG,
                                     formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--socket", default="", metavar="NAME", help="bench name or path of its control socket")
    parser.add_argument("--once", action="store_true", help="print the present status and end")
    parser.add_argument("--plain", action="store_true", help="lines instead of the screen")
    parser.add_argument("--bench-display", action="store_true", help="the page for the display beside the arm input")
    parser.add_argument("--plot", choices=sorted(PLOTS), help="what the plot shows at first (default: by state)")
    parser.add_argument("--no-bell", action="store_true",
                        help="no bell at the end of a hold, a reading due, a pause's end; a trip rings in any case")
    parser.add_argument("--no-colour", action="store_true", help="no colour (also where NO_COLOR is set)")
    parser.add_argument("--ascii", action="store_true", help="only signs that every terminal has")
    options = parser.parse_args(argv)
    from hvhost.publish.places import one_socket
    from hvhost.publish.screen import Look, show_lines, show_once, show_screen
    from hvhost.publish.wording import Plotted

    try:
        path = one_socket(options.socket)
        if options.once:
            show_once(path, sys.stdout)
        elif options.plain or not sys.stdout.isatty():
            return exits.PASSED if show_lines(path, sys.stdout) else exits.CANNOT_CONNECT
        else:
            show_screen(path, look=Look(
                bench_display=options.bench_display, bell=not options.no_bell, colour=not options.no_colour,
                plotted=Plotted[PLOTS[options.plot]] if options.plot else Plotted.BY_STATE,
                ascii_only=True if options.ascii else None))
    except HvhostError as fault:
        print(f"watch: {fault}", file=sys.stderr)
        return fault.exit_code
    except BrokenPipeError:
        # the reader of our lines is gone; keep the interpreter from complaining about it at its end
        os.dup2(os.open(os.devnull, os.O_WRONLY), 1)
    return exits.PASSED
