"""The instrument socket's shell: TCP connections, each a `Session`; bounded in clients, bytes, time and processor.

Whatever a client does harms nobody else: bytes are read in small pieces; commands of all clients are carried out a few
at a time in turn, and in all take at most a fifth of the processor; a client that does not read its answers is asked
nothing more and then disconnected; one that floods is disconnected; one that is silent costs its memory; one whose
machine is gone is found by TCP's own probes, and then its seat is free.  Stops alone wait for none of this.
"""

import asyncio
import contextlib
import os
import secrets
import socket
from collections import deque
from dataclasses import dataclass, field
from typing import Any

from hvhost.bench.instrument import Instrument
from hvhost.bench.model import Bench
from hvhost.publish.instrument.commands import TREE
from hvhost.publish.instrument.conditions import operation_of, questionable_of
from hvhost.publish.instrument.device import Caller, Device
from hvhost.publish.instrument.session import Session, TalkLimits
from hvhost.publish.outlet import Host
from hvhost.publish.snapshot import OutletView, Snapshot
from hvhost.words.errors import CannotConnect

CHUNK = 2_048  # bytes read at once: what one look for stops costs
BACKLOG = 32
AT_ONCE = 4  # sessions whose turn comes in one go
SHARE = 4.0  # after so much work, so many times as long for everything else
# probes that find a machine that is gone, no delay, and kernel buffers that bound what is unread
OPTIONS = (("SO_KEEPALIVE", socket.SOL_SOCKET, 1), ("TCP_KEEPIDLE", socket.IPPROTO_TCP, 5),
           ("TCP_KEEPINTVL", socket.IPPROTO_TCP, 2), ("TCP_KEEPCNT", socket.IPPROTO_TCP, 3),
           ("TCP_USER_TIMEOUT", socket.IPPROTO_TCP, 11_000), ("TCP_NODELAY", socket.IPPROTO_TCP, 1),
           ("SO_SNDBUF", socket.SOL_SOCKET, 32_768), ("SO_RCVBUF", socket.SOL_SOCKET, 32_768))


@dataclass(frozen=True, slots=True, kw_only=True)
class ServerLimits:
    """Clients served, clients for stops only beyond them, unread bytes before asking stops, seconds unread."""

    clients: int = 64
    stops_only: int = 2 * BACKLOG
    unread: int = 65_536
    unread_s: float = 10.0
    talk: TalkLimits = field(default_factory=TalkLimits)


class InstrumentServer:
    """One bench's instrument socket: an outlet that takes pictures, and a service that listens until cancelled."""

    name = "instrument"

    def __init__(self, bench: Bench, place: Instrument, host: Host, limits: ServerLimits | None = None) -> None:
        self.place, self.host, self.limits = place, host, limits or ServerLimits()
        self.device = Device(bench, host.ask)
        self.port = place.port  # the one that was given, where 0 was asked for
        self.refused = 0
        self._valid_until = bench.calibration_valid_until if bench.calibrated else None
        self._connections: dict[int, _Connection] = {}
        self._number = self._lost = self._faults = 0
        self._ready: deque[_Connection] = deque()
        self._pumping = False
        self._conditions = (0, 0)
        self._loop: asyncio.AbstractEventLoop | None = None

    # ------------------------------------------------------------ an outlet and a service

    async def serve(self) -> None:
        """Listen until cancelled; raises `CannotConnect` where the place is taken or not this machine's."""
        self._loop = asyncio.get_running_loop()
        try:
            server = await self._loop.create_server(lambda: _Connection(self), self.place.host, self.place.port,
                                                    backlog=BACKLOG)
        except OSError as fault:
            raise CannotConnect("a free address of this machine", fault.strerror or str(fault),
                                f"{self.place.host} port {self.place.port}",
                                "end what listens there or change 'listen' in the bench file") from None
        self.port = server.sockets[0].getsockname()[1]
        self.host.say(f"instrument socket on {self.place.host} port {self.port}")
        try:
            await self._loop.create_future()
        finally:
            server.close()
            for connection in tuple(self._connections.values()):
                connection.end()

    def offer_nowait(self, snapshot: Snapshot) -> None:
        """Take a picture: end what it ends, show its conditions to everybody, and go on with what waited for it."""
        if self._loop is None:
            return
        now_s = self._loop.time()
        endings = self.device.take(snapshot)
        operation, questionable = operation_of(snapshot), questionable_of(snapshot, self._valid_until)
        self._conditions = operation, questionable
        for connection in tuple(self._connections.values()):
            connection.session.news(endings, operation, questionable, now_s)
            connection.look(now_s)
            if connection.session.waits:
                self.wake(connection)

    def view(self) -> OutletView:
        """Lines and connections that could not be served, faults of ours, clients."""
        living = [connection.session for connection in self._connections.values()]
        return OutletView(name=self.name, dropped=self._lost + self.refused + sum(one.lost for one in living),
                          failed=self._faults + sum(one.faults for one in living), clients=len(living))

    # ------------------------------------------------------------ connections

    def admit(self, connection: "_Connection", peer: tuple[Any, ...] | None) -> Session | None:
        """A session for a new connection; None where its address may not connect."""
        assert self._loop is not None
        address = str(peer[0]) if peer else ""
        if not self.place.admits(address):
            self.refused += 1
            if self.refused == 1:
                self.host.say(f"instrument: {address or 'who has no address'} refused: not in the bench file's 'allow'")
            return None
        full = sum(not one.session.stops_only for one in self._connections.values()) >= self.limits.clients
        if full:
            surplus = [one for one in self._connections.values() if one.session.stops_only]
            for one in surplus[: max(0, len(surplus) - self.limits.stops_only + 1)]:
                one.end()
        self._number += 1
        caller = Caller(who=f"instrument {address}:{peer[1] if peer else 0}", ticket=secrets.token_hex(8),
                        number=self._number)
        session = Session(self.device, TREE, caller, connection.send, self._loop.time(), self.limits.talk,
                          stops_only=full)
        session.status.operation.condition, session.status.questionable.condition = self._conditions
        self._connections[self._number] = connection
        return session

    def left(self, connection: "_Connection") -> None:
        """Forget a connection; its seat is free."""
        session = connection.session
        if self._connections.pop(session.caller.number, None) is not None:
            session.ended(self._loop.time() if self._loop is not None else session.now_s)
            self._lost += session.lost
            self._faults += session.faults

    # ------------------------------------------------------------ turns

    def wake(self, connection: "_Connection") -> None:
        """Give a connection a turn soon."""
        if not connection.queued:
            connection.queued = True
            self._ready.append(connection)
            self._pump_after(0.0)

    def _pump_after(self, delay_s: float) -> None:
        if self._pumping or self._loop is None:
            return
        self._pumping = True
        if delay_s > 0.0:
            self._loop.call_later(delay_s, self._pump)
        else:
            self._loop.call_soon(self._pump)

    def _pump(self) -> None:
        """Let the next few sessions work, then leave the loop to everything else for as long as they are worth."""
        assert self._loop is not None
        self._pumping = False
        began_s = self._loop.time()
        for _ in range(min(AT_ONCE, len(self._ready))):
            connection = self._ready.popleft()
            connection.queued = False
            connection.work(self._loop.time())
        if self._ready:
            self._pump_after(SHARE * (self._loop.time() - began_s))


class _Connection(asyncio.BufferedProtocol):
    """One client: bytes to its session in small pieces, whole answers back."""

    session: Session

    def __init__(self, server: InstrumentServer) -> None:
        self.queued = False
        self._server = server
        self._loop = asyncio.get_running_loop()
        self._transport: asyncio.Transport | None = None
        self._chunk = bytearray(CHUNK)
        self._blocked_s: float | None = None
        self._last = False  # the client sends no more

    def connection_made(self, transport: asyncio.BaseTransport) -> None:
        assert isinstance(transport, asyncio.Transport)
        session = self._server.admit(self, transport.get_extra_info("peername"))
        if session is None:
            transport.abort()
            return
        self.session, self._transport = session, transport
        transport.set_write_buffer_limits(high=self._server.limits.unread)
        for name, level, value in OPTIONS:
            option = getattr(socket, name, None)
            with contextlib.suppress(OSError):  # a system without this option has its own, longer, times
                if option is not None:
                    transport.get_extra_info("socket").setsockopt(level, option, value)

    def get_buffer(self, sizehint: int) -> bytearray:
        return self._chunk

    def buffer_updated(self, nbytes: int) -> None:
        if self._transport is None:
            return
        self.session.receive(bytes(memoryview(self._chunk)[:nbytes]), self._loop.time())
        if self.session.hopeless:
            self.end()
        else:
            self._server.wake(self)

    def eof_received(self) -> bool:
        """The client may still read: its answers are sent before the connection closes."""
        if self._transport is None:
            return False
        self._last = True
        self.session.no_more(self._loop.time())
        self._server.wake(self)
        return True

    def pause_writing(self) -> None:
        self.session.blocked, self._blocked_s = True, self._loop.time()

    def resume_writing(self) -> None:
        self.session.blocked, self._blocked_s = False, None
        self._server.wake(self)

    def connection_lost(self, error: Exception | None) -> None:
        if self._transport is None:
            return
        self._take_last_bytes()
        self._transport = None
        self._server.left(self)

    def send(self, line: bytes) -> None:
        """Hand an answer to the transport; bounded, because a session that is blocked answers no more."""
        if self._transport is not None and not self._transport.is_closing():
            self._transport.write(line)

    def work(self, now_s: float) -> None:
        """Go on with what waited, then one more message; ask for another turn where there is more."""
        if self._transport is None:
            return
        session = self.session
        session.resume(now_s)
        wait_s = session.turn(now_s)
        if session.ready and wait_s > 0.0:
            self._loop.call_later(wait_s, self._server.wake, self)
        elif session.ready:
            self._server.wake(self)
        elif self._last and session.idle:
            self._transport.close()

    def look(self, now_s: float) -> None:
        """Disconnect a client that has not read its answers for too long."""
        if self._blocked_s is not None and now_s - self._blocked_s > self._server.limits.unread_s:
            self.end()

    def end(self) -> None:
        """Disconnect at once; what was not read is lost."""
        if self._transport is not None:
            self._transport.abort()

    def _take_last_bytes(self) -> None:
        """Read what the client wrote before it went: a failed write of ours must not swallow its stop."""
        assert self._transport is not None
        descriptor = self._transport.get_extra_info("socket").fileno()
        if descriptor < 0:
            return
        try:
            data = os.read(descriptor, CHUNK)
        except OSError:
            return
        if data:
            self.session.receive(data, self._loop.time())
