"""``hvhost arm``: arm the prepared run, or open and arm a direct run; ``--cancel`` voids an open request."""

from hvhost.cli import exits
from hvhost.cli.follow import Follower, finish
from hvhost.cli.run import arm_and_follow, tell_opened
from hvhost.cli.talk import Bench, parser_of
from hvhost.publish.tickets import ticket_file, write_ticket
from hvhost.words.errors import UsageFault

ABOUT = """Arms the run that 'hvhost run --prepare' opened.  Without one, and with --specimen, it opens a direct run
(set-points by hand with 'hvhost set', limits of the bench file) and keeps control until it ends: Ctrl-C lowers.
--cancel voids an open request or a prepared run, by a cut."""


def run(argv: list[str]) -> int:
    """Arm or cancel; follows the run to its close."""
    parser = parser_of("arm", ABOUT)
    parser.add_argument("--cancel", action="store_true")
    parser.add_argument("--specimen", default="", metavar="ID", help="for a direct run")
    parser.add_argument("--operator", default="")
    parser.add_argument("--reason", default="")
    parser.add_argument("--quiet", action="store_true")
    parser.add_argument("--json", action="store_true")
    options = parser.parse_args(argv)
    with Bench(options) as bench:
        if options.cancel:
            cancelled = bench.call("cancel")["cancelled"]
            print(f"cancelled: {cancelled}")
            return exits.PASSED
        bench.take_seat()
        status = bench.status()
        if status["stage"] == "prepared":
            return arm_and_follow(bench, status["run"], options, keep=True)
        if status["stage"] not in ("", "closed"):
            return finish(Follower(bench, status["run"], quiet=options.quiet).follow(), options.json)
        if not options.specimen:
            raise UsageFault("a prepared run, or --specimen ID for a direct run", "neither", "arm")
        opened = bench.call("direct", specimen=options.specimen, operator=options.operator, reason=options.reason)
        tell_opened(opened)
        write_ticket(bench.path, bench.ticket)  # so that this user's `hvhost set` commands in the same name
        try:
            return arm_and_follow(bench, opened["run"], options)
        finally:
            ticket_file(bench.path).unlink(missing_ok=True)
