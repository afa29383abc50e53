"""Stand-ins in real time: pseudo-terminals and TCP ports, a control socket, a truth file, one process.

Each step lets every stand-in catch up with the clock and gives its bytes to its line; bytes from a host are fed when
they come.  If this process itself was stopped or starved, the benches' time stands still meanwhile: a stand-in never
rushes through seconds that nobody could watch.
"""

import asyncio
import contextlib
import os
import socket
import time
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Protocol

from hvhost.standin.acts import Bench, Quit, act
from hvhost.standin.uart import Line
from hvhost.words.errors import CannotConnect

STEP_S = 0.002
STALL_S = 0.1  # further behind than this the benches' time stands still
COMMAND_MAX = 512
CLIENTS_MAX = 16


class Served(Bench, Protocol):
    """A stand-in as it is served."""

    def advance_to(self, tick: int) -> None:
        """Let time pass."""

    def feed(self, data: bytes) -> None:
        """Take bytes from the host."""

    def take_output(self) -> bytes:
        """Return bytes for the host."""


class Pace:
    """Which tick it is: real time since the start, less the time in which this process did not run."""

    __slots__ = ("_ahead_s", "_last_s", "_tick_hz", "stalled_s")

    def __init__(self, tick_hz: int, now_s: float) -> None:
        self._tick_hz = tick_hz
        self._last_s = now_s
        self._ahead_s = 0.0
        self.stalled_s = 0.0

    def tick(self, now_s: float) -> int:
        """Return the tick that belongs to this moment; never less than before."""
        passed_s = max(0.0, now_s - self._last_s)
        self._last_s = max(now_s, self._last_s)
        if passed_s > STALL_S:
            self.stalled_s += passed_s - STALL_S
            passed_s = STALL_S
        self._ahead_s += passed_s
        return int(self._ahead_s * self._tick_hz)


class Station:
    """One stand-in with its line."""

    def __init__(self, bench: Served, line: Line, tick_hz: int, clock: Callable[[], float] = time.monotonic,
                 dropped: Callable[[int], None] | None = None) -> None:
        self.bench, self.line = bench, line
        self._clock, self._pace = clock, Pace(tick_hz, clock())
        self._told, self._tell_dropped = 0, dropped
        line.on_bytes = self.take

    def step(self) -> None:
        """Catch up with the clock and pass on what the MCU says."""
        self.line.look()
        self.bench.advance_to(self._pace.tick(self._clock()))
        self._flush()

    def take(self, data: bytes) -> None:
        """Feed a host's bytes at the moment they came; the answer leaves at once."""
        self.bench.advance_to(self._pace.tick(self._clock()))
        self.bench.feed(data)
        self._flush()

    def _flush(self) -> None:
        if data := self.bench.take_output():
            self.line.send(data)
            lost = self.line.dropped - self._told
            # nobody there is no loss worth telling; a host that does not read is
            if lost and self.line.connected and self._tell_dropped is not None:
                self._tell_dropped(lost)
            self._told = self.line.dropped


class Control:
    """A Unix socket that takes one-line commands; ``2 press`` speaks to the second stand-in."""

    def __init__(self, path: Path, stations: Sequence[Station], done: asyncio.Event) -> None:
        self._path, self._stations, self._done = path, stations, done
        self._clients = 0
        self._server: asyncio.Server | None = None

    async def open(self) -> None:
        """Listen; a socket left behind by a process that is gone is replaced, a living one is not."""
        if self._path.is_socket():
            with socket.socket(socket.AF_UNIX) as probe:
                if probe.connect_ex(str(self._path)) == 0:
                    raise CannotConnect("a free socket", "one in use", str(self._path), "choose another path")
            self._path.unlink()
        mask = os.umask(0o177)
        try:
            self._server = await asyncio.start_unix_server(self._serve, str(self._path), limit=COMMAND_MAX)
        except OSError as refused:
            raise CannotConnect(f"cannot listen there: {refused.strerror or refused}", where=str(self._path),
                                remedy="choose another path") from None
        finally:
            os.umask(mask)

    async def close(self) -> None:
        """Stop listening and remove the socket."""
        if self._server is not None:
            self._server.close()
            with contextlib.suppress(FileNotFoundError):
                self._path.unlink()

    async def _serve(self, reader: asyncio.StreamReader, writer: asyncio.StreamWriter) -> None:
        if self._clients >= CLIENTS_MAX:
            writer.close()
            return
        self._clients += 1
        try:
            while line := await reader.readline():
                writer.write((self.command(line.decode("utf-8", "replace")) + "\n").encode())
                await writer.drain()
                if self._done.is_set():
                    return
        except (ValueError, ConnectionError):  # a line beyond the limit, or a client that left
            return
        finally:
            self._clients -= 1
            writer.close()

    def command(self, text: str) -> str:
        """Carry out one line and return its answer."""
        number, _, rest = text.strip().partition(" ")
        at = 0
        if number.isascii() and number.isdigit():
            at, text = int(number) - 1, rest
        if not 0 <= at < len(self._stations):
            return f"error command: expected a stand-in from 1 to {len(self._stations)}, found {number[:20]}"
        station = self._stations[at]
        station.step()
        try:
            return act(station.bench, text)
        except Quit:
            self._done.set()
            return "ok quit"


async def serve(stations: Sequence[Station], done: asyncio.Event, control: Path | None = None) -> None:
    """Run until ``done`` is set; lines and socket are closed after."""
    listener = Control(control, stations, done) if control is not None else None
    try:
        if listener is not None:
            await listener.open()
        while not done.is_set():
            for station in stations:
                station.step()
            await asyncio.sleep(STEP_S)
    finally:
        for station in stations:
            station.line.close()
        if listener is not None:
            await listener.close()
