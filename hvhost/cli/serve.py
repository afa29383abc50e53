"""``hvhost serve BENCH``: the daemon of one bench."""

import argparse
import asyncio
from pathlib import Path

from hvhost.cli import exits
from hvhost.words.errors import HvhostError

ABOUT = """Serves one bench until it is told to stop: opens the port of the bench file, greets the MCU, and answers on
the bench's local control socket.  It starts passive: it reports what the MCU says and energises nothing.
Ctrl-C or SIGTERM lowers first."""


def run(argv: list[str]) -> int:
    """Serve; returns when told to stop, or the code of what prevented it."""
    parser = argparse.ArgumentParser(prog="hvhost serve", description=ABOUT, epilog=exits.EPILOG)
    parser.add_argument("bench", metavar="BENCH")
    parser.add_argument("--port", default="", metavar="DEVICE", help="instead of the bench file's port")
    parser.add_argument("--socket", default="", metavar="PATH", help="instead of the bench's own control socket")
    parser.add_argument("--runs", default="", metavar="FOLDER", help="instead of the bench file's runs folder")
    parser.add_argument("--standin", action="store_true",
                        help="the port leads to a stand-in: its runs are marked as rehearsals")
    options = parser.parse_args(argv)
    from hvhost.bench.file import load_bench
    from hvhost.daemon import Daemon

    bench = load_bench(Path(options.bench))
    daemon = Daemon(bench, socket=options.socket, device=options.port, rehearsal=options.standin,
                    runs_root=Path(options.runs) if options.runs else None)
    return serve(daemon)


def serve(daemon: "object") -> int:
    """Run a daemon to its end; the first error of its group is told as a sentence."""
    from hvhost.daemon import Daemon

    assert isinstance(daemon, Daemon)
    daemon.say(f"serving {daemon.bench.name} on {daemon.server.path}, port {daemon.device}")
    try:
        asyncio.run(daemon.run())
    except BaseExceptionGroup as group:
        known = group.subgroup(HvhostError)
        if known is None:
            raise
        raise first_of(known) from None
    return exits.PASSED


def first_of(group: BaseExceptionGroup[HvhostError]) -> HvhostError:
    """The first error inside a group of groups."""
    for error in group.exceptions:
        return first_of(error) if isinstance(error, BaseExceptionGroup) else error
    raise AssertionError("an exception group is never empty")
