"""``hvhost commission BENCH``: write a bench file's settings into the MCU, read them back, show both, record who."""

import argparse
import asyncio
import json
import sys
import tempfile
import time
from pathlib import Path

from hvhost.bench.file import load_bench
from hvhost.bench.model import Bench
from hvhost.bench.settings_from import shown_setting
from hvhost.cli import exits
from hvhost.cli.talk import who_of
from hvhost.daemon import Daemon
from hvhost.publish.log import Silent
from hvhost.supervisor.core import Core
from hvhost.supervisor.states import LinkState
from hvhost.wire.settings import KEYS, SETTINGS, Settings
from hvhost.wire.vocabulary import Inputs
from hvhost.words.errors import CannotConnect, CommandRefused, UsageFault

ABOUT = """Compares the MCU's settings with the bench file's, shows both, and with your consent writes them into its
EEPROM.  The interlock must be open; a latch does not hinder.  Who and when is kept in the runs folder
(commissioning.jsonl).  End the daemon of this bench first: the port is used by one program at a time."""
GREET_S = 15.0
LOG = "commissioning.jsonl"


def run(argv: list[str]) -> int:
    """Compare, ask, write, read back."""
    parser = argparse.ArgumentParser(prog="hvhost commission", description=ABOUT, epilog=exits.EPILOG,
                                     formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("bench", metavar="BENCH")
    parser.add_argument("--port", default="", metavar="DEVICE", help="instead of the bench file's port")
    parser.add_argument("--runs", default="", metavar="FOLDER", help="instead of the bench file's runs folder")
    parser.add_argument("--as", dest="who", default="", metavar="NAME", help="your name, for the record")
    parser.add_argument("--yes", action="store_true", help="write without asking")
    parser.add_argument("--show", action="store_true", help="compare only")
    options = parser.parse_args(argv)
    bench = load_bench(Path(options.bench))
    root = Path(options.runs or bench.runs_folder).expanduser()
    with tempfile.TemporaryDirectory(prefix="hvhost-") as folder:
        daemon = Daemon(bench, socket=f"{folder}/commission.sock", device=options.port, runs_root=Path(folder),
                        log=Silent())
        return asyncio.run(_session(daemon, bench, root, options))


async def _session(daemon: Daemon, bench: Bench, root: Path, options: argparse.Namespace) -> int:
    serving = asyncio.create_task(daemon.run())
    try:
        return await _commission(daemon.station.core, daemon, bench, root, options, serving)
    finally:
        daemon.stop()
        await asyncio.gather(serving, return_exceptions=True)


async def _greeted(core: Core, serving: "asyncio.Task[None]") -> None:
    until_s = time.monotonic() + GREET_S
    while core.state.link not in (LinkState.GREETED, LinkState.OBSERVE) or core.sample is None:
        if serving.done():
            await serving
        if time.monotonic() > until_s:
            raise CannotConnect("an MCU that greets", core.link_text, "commission", "check port and wiring")
        await asyncio.sleep(0.02)


async def _commission(core: Core, daemon: Daemon, bench: Bench, root: Path, options: argparse.Namespace,
                      serving: "asyncio.Task[None]") -> int:
    await _greeted(core, serving)
    wanted, there = bench.settings(), core.greeting.settings if core.greeting else None
    table(bench, wanted, there)
    if there == wanted:
        print("the settings agree")
        return exits.PASSED
    if options.show:
        return exits.REFUSED
    if core.inputs & Inputs.INTERLOCK:
        raise CommandRefused("the interlock open", "interlock closed", "commission",
                             "open the interlock: settings are written with it open only")
    if not options.yes and not await asyncio.to_thread(_consent):
        print("nothing was written")
        return exits.REFUSED
    who = who_of(options)
    daemon.station.handle("seat.take", {"ticket": "commission"}, who)
    number = daemon.station.handle("commission", {"ticket": "commission"}, who)["ticket_number"]
    reply = await _reply(core, number)
    daemon.station.connect()  # a new session reads the settings back
    core.sample = None
    await _greeted(core, serving)
    now = core.greeting.settings if core.greeting else None
    log(root, who, bench, there, now, reply)
    if reply != "ok" or now != wanted:
        table(bench, wanted, now)
        print(f"hvhost commission: expected the bench file's settings, found others: {reply}", file=sys.stderr)
        return exits.REFUSED
    print(f"written and read back: checksum {wanted.checksum:08X}, by {who}")
    return exits.PASSED


def _consent() -> bool:
    try:
        return input("write the bench file's values into the MCU? (yes/no) ").strip() == "yes"
    except EOFError:
        print()
        raise UsageFault("an answer", "the end of the input", "commission", "answer from a terminal, or give --yes"
                         ) from None


async def _reply(core: Core, number: int) -> str:
    until_s = time.monotonic() + GREET_S
    while number not in core.replies and time.monotonic() < until_s:
        await asyncio.sleep(0.02)
    return core.replies.get(number, "no answer")


def table(bench: Bench, wanted: Settings, there: Settings | None) -> None:
    """Print every setting that differs, both values in SI and in codes."""
    print(f"{'setting':<10} {'MCU':<30} {'bench file':<30} meaning")
    for key, setting in zip(KEYS, SETTINGS, strict=True):
        found = "blank" if there is None else shown_setting(bench, key, there[key])
        if there is None or there[key] != wanted[key]:
            print(f"{key:<10} {found:<30} {shown_setting(bench, key, wanted[key]):<30} {setting.meaning}")


def log(root: Path, who: str, bench: Bench, before: Settings | None, after: Settings | None, reply: str) -> None:
    """Keep who wrote what and when, one JSON line each time."""
    root.mkdir(parents=True, exist_ok=True)
    entry = {"utc_ns": time.time_ns(), "by": who, "bench": bench.name, "bench_sha256": bench.sha256, "reply": reply,
             "before": list(before.values) if before else None, "after": list(after.values) if after else None,
             "checksum": f"{after.checksum:08X}" if after else ""}
    with (root / LOG).open("a", encoding="ascii") as file:
        file.write(json.dumps(entry) + "\n")
