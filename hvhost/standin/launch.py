"""From a command line to running stand-ins: arguments, what they build, and the first lines that are printed.

Printed on standard output, each on its own line, before anything runs: ``seed N``, then one ``port NAME`` for each
stand-in in order, then ``control PATH`` and ``truth PATH`` where asked for.  Several stand-ins take consecutive seeds;
files of the second and later ones get ``.2``, ``.3`` ... at their end.
"""

import argparse
import asyncio
import contextlib
import signal
from collections.abc import Callable, Sequence
from pathlib import Path
from random import SystemRandom
from typing import TextIO

from hvhost.standin.acts import act_lines
from hvhost.standin.bench import StandIn
from hvhost.standin.eeprom import Eeprom, FileStore
from hvhost.standin.factory import factory_settings
from hvhost.standin.faults import fault_lines, parse_fault
from hvhost.standin.params import PROFILES, PlantParams, changed
from hvhost.standin.serve import Station, serve
from hvhost.standin.truth import TruthLog
from hvhost.standin.uart import Line, PtyLine, TcpLine, parse_address
from hvhost.words.errors import CannotConnect, UsageFault

SIDE_BY_SIDE_MAX = 16


def add_arguments(parser: argparse.ArgumentParser) -> None:
    """Declare every argument, with the lists of faults and commands below them."""
    parser.formatter_class = argparse.RawDescriptionHelpFormatter
    parser.add_argument("--seed", type=int, metavar="N",
                        help="one seed decides everything (drawn and printed if absent)")
    parser.add_argument("--profile", choices=sorted(PROFILES), default="demo", help="which bench (default demo)")
    parser.add_argument("--set", action="append", default=[], metavar="KEY=VALUE", dest="changes",
                        help="change the plant, as in 'specimen.strength_v=12 kV'")
    parser.add_argument("--pty", type=int, nargs="?", const=1, default=0, metavar="N",
                        help="answer on so many pseudo-terminals (default: one, if there is no --tcp)")
    parser.add_argument("--tcp", action="append", default=[], metavar="HOST:PORT",
                        help="answer on a TCP port, 0 for a free one; may be given again")
    parser.add_argument("--eeprom", type=Path, metavar="FILE", help="keep the EEPROM here (a new file is blank)")
    parser.add_argument("--factory", action="store_true", help="a blank EEPROM gets the profile's settings first")
    parser.add_argument("--fault", action="append", default=[], metavar="NAME[=VALUE][@WHEN][+SPAN]", dest="faults",
                        help="a fault of the list below; may be given again")
    parser.add_argument("--control", type=Path, metavar="SOCKET", help="take commands on this Unix socket")
    parser.add_argument("--truth", type=Path, metavar="FILE", help="write what really happens as JSON lines")
    parser.epilog = "\n".join([
        "faults (WHEN is a time such as 12.5s or a true voltage such as 8kV, SPAN a duration; [default value]):",
        *fault_lines(), "", "commands on the control socket, a line each (a number first speaks to a later stand-in):",
        *act_lines(), "", parser.epilog or ""])


def run_standin(args: argparse.Namespace) -> int:
    """Serve until told to quit (SIGINT, SIGTERM or ``quit``); raises HvhostError before anything runs."""
    seed = SystemRandom().randrange(1 << 32) if args.seed is None else args.seed
    for text in args.faults:
        parse_fault(text)
    params = changed(PROFILES[args.profile](), args.changes)
    print(f"seed {seed}", flush=True)
    with contextlib.ExitStack() as files:
        asyncio.run(_serve(args, params, seed, files))
    return 0


async def _serve(args: argparse.Namespace, params: PlantParams, seed: int, files: contextlib.ExitStack) -> None:
    lines = _lines(args.pty, args.tcp)
    try:
        stations = [_station(args, params, seed, at, line, files) for at, line in enumerate(lines)]
    except BaseException:
        for line in lines:
            line.close()
        raise
    for line in lines:
        print(f"port {line.name}", flush=True)
    for word, path in (("control", args.control), ("truth", args.truth)):
        if path is not None:
            print(f"{word} {path}", flush=True)
    done = asyncio.Event()
    loop = asyncio.get_running_loop()
    for number in (signal.SIGINT, signal.SIGTERM):
        loop.add_signal_handler(number, done.set)
    await serve(stations, done, args.control)


def _lines(ptys: int, addresses: Sequence[str]) -> list[Line]:
    count = ptys or (0 if addresses else 1)
    if not 0 <= count <= SIDE_BY_SIDE_MAX or len(addresses) > SIDE_BY_SIDE_MAX:
        raise UsageFault(f"at most {SIDE_BY_SIDE_MAX} stand-ins side by side", str(count + len(addresses)), "standin")
    wanted = [parse_address(text) for text in addresses]
    lines: list[Line] = [PtyLine() for _ in range(count)]
    try:
        for host, port in wanted:
            lines.append(TcpLine(host, port))
    except CannotConnect:
        for line in lines:
            line.close()
        raise
    return lines


def _nth(path: Path, at: int) -> Path:
    return path if at == 0 else path.with_name(f"{path.name}.{at + 1}")


def _open(path: Path, files: contextlib.ExitStack) -> TextIO:
    try:
        return files.enter_context(path.open("w", encoding="ascii", buffering=1))
    except OSError as refused:
        raise UsageFault(f"cannot write it: {refused.strerror}", where=str(path), remedy="name another file") from None


def _station(args: argparse.Namespace, params: PlantParams, seed: int, at: int, line: Line,
             files: contextlib.ExitStack) -> Station:
    settings = factory_settings(args.profile) if args.factory else None
    eeprom = Eeprom(settings, FileStore(_nth(args.eeprom, at)) if args.eeprom is not None else None)
    truth: TruthLog | None = None
    if args.truth is not None:
        truth = TruthLog(_open(_nth(args.truth, at), files).write, tick_hz=StandIn.TICK_HZ)
        truth.start(seed=seed + at, profile=args.profile, tick_hz=StandIn.TICK_HZ, faults=args.faults)
    bench = StandIn(params, seed + at, eeprom=eeprom, faults=args.faults, truth=truth)
    return Station(bench, line, StandIn.TICK_HZ, dropped=_dropped(bench, truth))


def _dropped(bench: StandIn, truth: TruthLog | None) -> Callable[[int], None] | None:
    if truth is None:
        return None
    return lambda count: truth.event(bench.mcu.tick, bench.plant.t_s, "dropped", float(count))
