"""``hvhost seat``: take control and keep it until this command ends."""

import time

from hvhost.cli import exits
from hvhost.cli.talk import Bench, parser_of
from hvhost.publish.tickets import read_ticket, ticket_file, write_ticket

ABOUT = """Takes control of the bench and keeps it while this command runs; the same user's other commands use it.
A plan run goes on without anyone in control; a direct run lowers after 10 s.  Stopping needs no control."""


def run(argv: list[str]) -> int:
    """Hold the seat, acknowledge a stop, or release."""
    parser = parser_of("seat", ABOUT)
    parser.add_argument("--reason", default="", help="take it over from its holder, with this reason")
    parser.add_argument("--acknowledge", action="store_true", help="you have seen that someone else stopped the bench")
    options = parser.parse_args(argv)
    with Bench(options) as bench:
        if options.acknowledge:
            bench.ticket = read_ticket(bench.path)
            bench.call("seat.acknowledge")
            print("acknowledged")
            return exits.PASSED
        bench.ticket = str(bench.call("seat.take", reason=options.reason)["ticket"])
        write_ticket(bench.path, bench.ticket)
        print(f"control: {bench.who}; it ends with this command (Ctrl-C)", flush=True)
        try:
            while bench.call("seat.check")["holder"]:
                time.sleep(0.5)
        except KeyboardInterrupt:
            bench.call("seat.release")
            print("control released")
        finally:
            ticket_file(bench.path).unlink(missing_ok=True)
    return exits.PASSED
