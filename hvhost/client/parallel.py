"""The flavour for asyncio: the same bench with ``await``; any number of tasks may use it at once.

Calls go one at a time over one connection; ``lower``, ``cut`` and each loop over ``readings`` have connections of their
own, so that a stop waits behind nothing.
"""

import asyncio
import json
from collections.abc import AsyncIterator, Callable, Mapping
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Any, Self

from hvhost.client import asking
from hvhost.client.asking import CONFIRM_S, CONFIRMED, NOT_CONFIRMED, POLL_S, Prepared
from hvhost.client.readings import Readings, Span, readings_in, still_s
from hvhost.client.runs import Record, Runs
from hvhost.publish.client import ANSWER_LIMIT, ANSWER_S, CONNECT_S, result_of
from hvhost.publish.places import one_socket
from hvhost.publish.snapshot import Permission, Snapshot
from hvhost.publish.tickets import ticket_file, write_ticket
from hvhost.record.catalogue import RunSummary
from hvhost.words.errors import CannotConnect, CommandRefused

if TYPE_CHECKING:
    from types import TracebackType

_GONE = "see whether the daemon still runs; if in doubt use the emergency switching off"


def connect_async(bench: str = "", *, who: str = "") -> "AsyncBench":
    """Return the bench for ``async with``; see `hvhost.client.connect`."""
    return AsyncBench(one_socket(bench), who)


class Line:
    """One connection of requests and answers, used by one task at a time."""

    def __init__(self, path: str, reader: asyncio.StreamReader, writer: asyncio.StreamWriter) -> None:
        self.path, self._reader, self._writer = path, reader, writer
        self._number = 0
        self._one = asyncio.Lock()

    @classmethod
    async def open(cls, path: str, limit: int = ANSWER_LIMIT) -> "Line":
        """Connect; raises `CannotConnect`."""
        try:
            async with asyncio.timeout(CONNECT_S):
                reader, writer = await asyncio.open_unix_connection(path, limit=limit)
        except (OSError, TimeoutError) as error:
            raise CannotConnect("a running daemon", getattr(error, "strerror", None) or "no answer in time", path,
                                "start one with 'hvhost serve BENCH'") from None
        return cls(path, reader, writer)

    async def call(self, method: str, params: dict[str, Any]) -> Any:
        """Ask, and return the result; raises what the daemon raised."""
        async with self._one:
            self._number += 1
            request = {"jsonrpc": "2.0", "id": self._number, "method": method, "params": params}
            try:
                async with asyncio.timeout(ANSWER_S):
                    self._writer.write(b"\n" + json.dumps(request).encode("ascii") + b"\n")
                    await self._writer.drain()
                    while True:
                        message = await self.message()
                        if message.get("id") == self._number or ("error" in message and message.get("id") is None):
                            return result_of(message)
            except TimeoutError:
                raise CannotConnect("an answer in time", "none", self.path, _GONE) from None
            except OSError as error:
                raise CannotConnect("a connected daemon", error.strerror or str(error), self.path, _GONE) from None

    async def message(self) -> dict[str, Any]:
        """The next line; raises `CannotConnect` where the daemon is gone or talks something else."""
        try:
            line = await self._reader.readuntil(b"\n")
            message = json.loads(line)
        except (OSError, EOFError, asyncio.LimitOverrunError):
            raise CannotConnect("a connected daemon", "the connection ended", self.path, _GONE) from None
        except ValueError:
            message = None
        if not isinstance(message, dict):
            raise CannotConnect("JSON-RPC from the daemon", "something else", self.path, "is it a daemon of ours?")
        return message

    def close(self) -> None:
        """End the connection."""
        self._writer.close()

    async def __aenter__(self) -> Self:
        return self

    async def __aexit__(self, *_: object) -> None:
        self.close()


class AsyncBench:
    """A connection to one daemon, opened by ``async with``; every method as in `hvhost.client.Bench`."""

    def __init__(self, path: str, who: str = "") -> None:
        self.path = path
        self._who = asking.who_of(who)
        self._line: Line | None = None
        self._took = False

    async def __aenter__(self) -> Self:
        self._line = await Line.open(self.path)
        return self

    async def __aexit__(self, kind: "type[BaseException] | None", error: "BaseException | None",
                        trace: "TracebackType | None") -> None:
        await self.close()

    async def close(self) -> None:
        """End the connection; a direct run that nobody takes over is lowered 10 s later."""
        if self._took:
            ticket_file(self.path).unlink(missing_ok=True)
            self._took = False
        if self._line is not None:
            self._line.close()
            self._line = None

    async def _call(self, method: str, **params: Any) -> Any:
        """Ask for one method of the local socket; raises what the daemon raised."""
        if self._line is None:
            raise CannotConnect("an open connection", "none", self.path, "use `async with`")
        return await self._line.call(method, self._who.params(**params))

    async def take_control(self, reason: str = "") -> None:
        """Take the seat, or share the one that ``hvhost seat`` or ``hvhost arm`` of this user holds."""
        kept = asking.kept_ticket(self.path)
        if kept and not self._who.ticket:
            before, self._who = self._who, replace(self._who, ticket=kept)
            try:
                await self._call("seat.check")
            except CommandRefused:
                self._who = before  # it is of a seat that is over
            else:
                return
        ticket = str((await self._call("seat.take", reason=reason))["ticket"])
        self._who = replace(self._who, ticket=ticket)
        write_ticket(self.path, ticket)
        self._took = True

    async def release_control(self) -> None:
        """Free the seat where this client took it."""
        if self._took:
            await self._call("seat.release")
            ticket_file(self.path).unlink(missing_ok=True)
        self._took = False
        self._who = replace(self._who, ticket="")

    async def acknowledge(self) -> None:
        """Say that a stop by somebody else was seen."""
        await self._need_control()
        await self._call("seat.acknowledge")

    async def _need_control(self) -> None:
        if not self._who.ticket:
            await self.take_control()

    async def set(self, *, volts: float, amps: float, slew: float | None = None) -> None:
        """Head for a voltage and a current limit, in an energised direct run."""
        params = asking.set_params(volts, amps, slew)
        await self._need_control()
        await self._call("set", **params)

    async def run(self, plan: str | Path, sheet: str | Path | None = None, *, specimen: str = "", operator: str = "",
                  values: Mapping[str, str] | None = None, reason: str = "", repeat_of: str = "") -> Prepared:
        """Have a plan checked and its run prepared; it is never armed from here."""
        params = asking.run_params(plan, sheet, specimen=specimen, operator=operator, values=values, reason=reason,
                                   repeat_of=repeat_of)
        await self._need_control()
        return Prepared.of(await self._call("run", **params))

    async def direct(self, specimen: str, *, operator: str = "", reason: str = "") -> Prepared:
        """Prepare a direct run; it is never armed from here."""
        await self._need_control()
        return Prepared.of(await self._call("direct", specimen=specimen, operator=operator, reason=reason))

    async def cancel(self) -> str:
        """Void a run that is prepared or armed; returns its name."""
        return str((await self._call("cancel"))["cancelled"])

    async def lower(self) -> None:
        """Ramp to zero at the down-slew, then cut; needs no control."""
        async with await Line.open(self.path) as line:
            await line.call("lower", self._who.params())

    async def cut(self) -> None:
        """Cut at once; returns when the cut is confirmed, raises `CannotConnect` where it is not."""
        try:
            async with await Line.open(self.path) as line:
                await line.call("cut", self._who.params())
                confirmed = await _confirmed(line)
        except CannotConnect as fault:
            raise CannotConnect("a cut that is confirmed", str(fault), self.path, NOT_CONFIRMED) from None
        if not confirmed:
            raise CannotConnect("a cut that is confirmed", "no confirmation", self.path, NOT_CONFIRMED)

    async def status(self) -> Snapshot:
        """Everything that a screen shows, frozen."""
        return asking.snapshot_of(await self._call("snapshot"))

    async def wait_until(self, condition: Callable[[Snapshot], bool], timeout_s: float) -> Snapshot:
        """Look ten times a second until the condition holds; raises `CannotConnect` after ``timeout_s``."""
        until_s = asyncio.get_running_loop().time() + timeout_s
        while not condition(snapshot := await self.status()):
            if asyncio.get_running_loop().time() >= until_s:
                raise CannotConnect("the condition to hold", f"{snapshot.permission} after {timeout_s:g} s", self.path)
            await asyncio.sleep(0.1)
        return snapshot

    async def wait_energised(self, timeout_s: float = 120.0) -> Snapshot:
        """Wait until the run that was armed at the bench is energised."""
        return await self.wait_until(lambda s: s.permission is Permission.RUNNING, timeout_s)

    async def readings(self, *, every: int = 1, seconds: float | None = None) -> AsyncIterator[Readings]:
        """Yield blocks of readings as they come; see `hvhost.client.Bench.readings`."""
        span, patience_s = Span(every, seconds), still_s(every)
        async with await Line.open(self.path, limit=1 << 18) as line:
            await line.call("readings", {"every": every})
            block = None
            while block is None or not span.over(block):
                try:
                    block = await asyncio.wait_for(_next_readings(line), patience_s)
                except TimeoutError:
                    raise CannotConnect("readings", f"none for {patience_s:g} s", self.path,
                                        "see `hvhost status`") from None
                yield block

    async def runs(self, where: str = "") -> tuple[RunSummary, ...]:
        """The catalogue of this bench's runs folder."""
        return await asyncio.to_thread((await self._runs()).list, where)

    async def record(self, name: str = "last") -> Record:
        """The record of one run as arrays."""
        return await asyncio.to_thread((await self._runs()).record, name)

    async def _runs(self) -> Runs:
        return Runs(Path(str((await self._call("status"))["runs_folder"])))


async def _next_readings(line: Line) -> Readings:
    while (block := readings_in(await line.message())) is None:
        pass
    return block


async def _confirmed(line: Line) -> bool:
    """Whether a snapshot made after the cut says that it is confirmed (S7)."""
    first, _ = asking.stop_of(await line.call("snapshot", {}))
    until_s = asyncio.get_running_loop().time() + CONFIRM_S
    while asyncio.get_running_loop().time() < until_s:
        seq, stop = asking.stop_of(await line.call("snapshot", {}))
        if seq > first and stop in (CONFIRMED, NOT_CONFIRMED):
            return stop == CONFIRMED
        await asyncio.sleep(POLL_S)
    return False
