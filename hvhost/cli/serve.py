"""``hvhost serve BENCH``: the daemon of one bench."""

import argparse
import asyncio
import faulthandler
from pathlib import Path

from hvhost.cli import exits
from hvhost.words.errors import HvhostError

ABOUT = """Serves one bench until it is told to stop: opens the port of the bench file, greets the MCU, and answers on
the bench's local control socket.  It starts passive: it reports what the MCU says and energises nothing.
Ctrl-C or SIGTERM lowers first.  A service manager is told when it is ready, what it does and that it lives, where it
asks (see hvhost-bench@.service)."""


def run(argv: list[str]) -> int:
    """Serve; returns when told to stop, or the code of what prevented it."""
    parser = argparse.ArgumentParser(prog="hvhost serve", description=ABOUT, epilog=exits.EPILOG)
    parser.add_argument("bench", metavar="BENCH")
    parser.add_argument("--port", default="", metavar="DEVICE", help="instead of the bench file's port")
    parser.add_argument("--socket", default="", metavar="PATH", help="instead of the bench's own control socket")
    parser.add_argument("--runs", default="", metavar="FOLDER", help="instead of the bench file's runs folder")
    parser.add_argument("--standin", action="store_true",
                        help="the port leads to a stand-in: its runs are marked as rehearsals")
    parser.add_argument("--realtime", action="store_true",
                        help="take real-time scheduling where it is permitted; it is said where it is not")
    parser.add_argument("--log", choices=("auto", "plain", "journal", "json"), default="auto", dest="style",
                        help="how lines on standard error are written: auto knows a journal when it sees one")
    options = parser.parse_args(argv)
    from hvhost.bench.file import load_bench
    from hvhost.daemon import Daemon
    from hvhost.publish.log import log_of
    from hvhost.publish.notify import Notifier

    faulthandler.enable()  # where the watchdog's signal found the loop is worth a line for each call
    notifier = Notifier.taken_from()
    bench = load_bench(Path(options.bench))
    log = log_of(options.style, bench.name)
    try:
        return serve(Daemon(bench, socket=options.socket, device=options.port, rehearsal=options.standin,
                            runs_root=Path(options.runs) if options.runs else None, log=log, notifier=notifier,
                            realtime=options.realtime))
    finally:
        notifier.close()
        log.close()


def serve(daemon: "object") -> int:
    """Run a daemon to its end; the first error of its group is told as a sentence."""
    from hvhost.daemon import Daemon

    assert isinstance(daemon, Daemon)
    daemon.say(f"serving {daemon.bench.name} on {daemon.server.path}, port {daemon.device}")
    try:
        with asyncio.Runner(loop_factory=lambda: asyncio.SelectorEventLoop(daemon.gauge.selector())) as runner:
            runner.run(daemon.run())
    except BaseExceptionGroup as group:
        raise first_of(group.subgroup(HvhostError) or group) from None
    return exits.PASSED


def first_of(group: BaseExceptionGroup[BaseException]) -> BaseException:
    """The first error inside a group of groups."""
    for error in group.exceptions:
        return first_of(error) if isinstance(error, BaseExceptionGroup) else error
    raise AssertionError("an exception group is never empty")
