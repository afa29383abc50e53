"""The local control socket: the outlet and the way in for commands, over a Unix socket.

Lines are JSON-RPC 2.0 (see :mod:`hvhost.publish.jsonrpc`); commands go to one synchronous handler that the daemon
gives.  The server itself answers ``subscribe`` {rate_hz}, ``unsubscribe``, ``snapshot`` and ``readings`` {every}.  A
subscriber gets notifications ``snapshot`` with the fields that changed since the last one it was sent, or
``readings`` (see :mod:`hvhost.publish.readings`).

Nobody can slow anybody: writing never waits; a client that does not read loses notifications, counted, and is
disconnected when it leaves too much unread for too long.  Its stops are taken all the same, also the last bytes of
a client that is gone already.  More clients than the limit are served ``lower`` and ``cut`` only, and the oldest of
those makes room for the newest.
"""

import asyncio
import json
import os
import socket
import struct
from collections.abc import Callable
from dataclasses import dataclass, field, fields, replace
from typing import Any

from hvhost.publish import jsonrpc
from hvhost.publish.conversation import Conversation, Peer, TalkLimits
from hvhost.publish.jsonrpc import RpcFault
from hvhost.publish.listening import BACKLOG, ListeningSocket
from hvhost.publish.readings import EVERY_MOST, Backlog, ReadingsFeed
from hvhost.publish.snapshot import OutletView, Snapshot, plain

Handle = Callable[[str, dict[str, Any], Peer], Any]

# Changes that a watcher is told at once, whatever rate it asked for.
URGENT = ("link", "permission", "latched", "voltage", "stop", "pause_s", "arm", "warning_s")
RATE_MOST_HZ = 20.0
TOLD_A_TURN = 3  # clients: the first also has the texts made; with fifty in one turn bytes from the port would wait
TREND_EVERY_S = 1.0  # the one large field: a column of a wide plot stands for a second and more
CLOSING_TURNS = 6  # turns of the loop in which an accepted transport opens, or an aborted one closes
FIELDS = tuple(one.name for one in fields(Snapshot))
POINTS = frozenset(("trend", "recent"))


@dataclass(frozen=True, slots=True, kw_only=True)
class LocalLimits:
    """Bounds of the server: clients with every right, clients for stops only, unread bytes, seconds unread."""

    clients: int = 64
    stops_only: int = 2 * BACKLOG
    unread_notify: int = 65_536  # above this a notification is dropped
    unread_most: int = 524_288  # above this the client is disconnected
    unread_s: float = 30.0
    talk: TalkLimits = field(default_factory=TalkLimits)


class LocalServer:
    """Serves one bench; ``handle(method, params, peer)`` returns a plain value or a Later, or raises HvhostError.

    ``peer_gone(peer)`` is called when a connection ends (its seat is free then), ``note(text)`` gets who came and
    went for the record.  It is an :class:`Outlet` named 'local'.
    """

    name = "local"

    def __init__(self, path: str, handle: Handle, *, peer_gone: Callable[[Peer], None] | None = None,
                 note: Callable[[str], None] | None = None, limits: LocalLimits | None = None,
                 readings: ReadingsFeed | None = None) -> None:
        self.path, self.limits, self.readings = path, limits or LocalLimits(), readings
        self._handle, self._peer_gone, self._note = handle, peer_gone or _ignore, note or _ignore
        self._connections: dict[int, _Connection] = {}
        self._number = self._dropped = self._faults = 0
        self._latest: Snapshot | None = None
        self._texts = _FieldTexts()
        self.tell: Callable[[Snapshot, tuple[_Connection, ...]], None] = self._tell  # whoever times it may wrap it
        self._listening: ListeningSocket | None = None
        self._server: asyncio.Server | None = None

    async def open(self) -> None:
        """Listen; raises CannotConnect where another daemon serves this bench or the place cannot be used."""
        self._listening = ListeningSocket(self.path)
        loop = asyncio.get_running_loop()
        self._server = await loop.create_unix_server(lambda: _Connection(self), sock=self._listening.socket,
                                                     backlog=BACKLOG)

    async def close(self) -> None:
        """Stop listening, end every connection and remove the socket file; a second call does nothing."""
        if self._listening is not None and self._server is not None:
            # First no more accepting, then closing: asyncio forgets a connection that it accepted in the turn in
            # which its server closes, and the client would wait for ever.
            asyncio.get_running_loop().remove_reader(self._listening.socket.fileno())
            await _turns()
            self._server.close()
            self._server = None
        for connection in tuple(self._connections.values()):
            connection.end()
        if self._listening is not None:
            self._listening.close()
            self._listening = None
        await _turns()

    def offer_nowait(self, snapshot: Snapshot) -> None:
        """Keep the snapshot and notify the subscribers that are due, a few in each turn of the loop."""
        self._latest = snapshot
        if self.readings is not None:
            self._dropped += self.readings.spread()
        if self._connections:
            asyncio.get_running_loop().call_soon(self.tell, snapshot, tuple(self._connections.values()))

    def _tell(self, snapshot: Snapshot, connections: "tuple[_Connection, ...]") -> None:
        for connection in connections[:TOLD_A_TURN]:
            connection.notify(snapshot, self._texts)
            connection.drain()
        if rest := connections[TOLD_A_TURN:]:
            asyncio.get_running_loop().call_soon(self.tell, snapshot, rest)

    def view(self) -> OutletView:
        """Return the notifications dropped, the faults met and the clients connected."""
        return OutletView(name=self.name, dropped=self._dropped, failed=self._faults, clients=len(self._connections))

    def call(self, method: str, params: dict[str, Any], peer: Peer) -> Any:
        """Carry out one request: the server's own four, else the daemon's."""
        if method == "snapshot":
            return None if self._latest is None else self._latest.to_json()
        if method in ("subscribe", "unsubscribe"):
            return self._connections[peer.number].subscribe(method, params)
        if method == "readings":
            return self._connections[peer.number].ask_readings(params)
        return self._handle(method, params, peer)

    def admit(self, connection: "_Connection", uid: int, pid: int) -> Peer:
        """Give a new connection its number and rights; the oldest stops-only one makes room."""
        self._number += 1
        full = sum(not one.peer.stops_only for one in self._connections.values()) >= self.limits.clients
        peer = Peer(number=self._number, uid=uid, pid=pid, stops_only=full)
        if full:
            surplus = [one for one in self._connections.values() if one.peer.stops_only]
            for one in surplus[: max(0, len(surplus) - self.limits.stops_only + 1)]:
                one.end()
        self._connections[peer.number] = connection
        self._note(f"{peer.text} connected" + (", for stops only: too many clients" if full else ""))
        return peer

    def left(self, connection: "_Connection") -> None:
        """Forget a connection that ended."""
        if self._connections.pop(connection.peer.number, None) is not None:
            connection.no_readings()
            self._faults += connection.talk.faults
            self._note(f"{connection.peer.text} left")
            self._peer_gone(connection.peer)

    def lost_one(self) -> None:
        """Count a notification that a client did not get."""
        self._dropped += 1


class _Connection(asyncio.Protocol):
    """One client: bytes to its conversation, answers and notifications back, both bounded."""

    def __init__(self, server: LocalServer) -> None:
        self._server = server
        self._loop = asyncio.get_running_loop()
        self._transport: asyncio.Transport | None = None
        self._turning = False
        self._unread_since_s: float | None = None
        self._rate_hz = 0.0
        self._sent: Snapshot | None = None
        self._trend_s = float("-inf")
        self._dropped = 0
        self._backlog: Backlog | None = None

    def connection_made(self, transport: asyncio.BaseTransport) -> None:
        assert isinstance(transport, asyncio.Transport)
        self._transport = transport
        pid, uid = _credentials(transport)
        self.peer = self._server.admit(self, uid, pid)
        self.talk = Conversation(self.peer, self._server.call, self._send, self._loop.time(),
                                 self._server.limits.talk)

    def data_received(self, data: bytes) -> None:
        self.talk.receive(data, self._loop.time())
        if self.talk.hopeless:
            self.end()
        elif not self._turning:
            self._turn()

    def connection_lost(self, error: Exception | None) -> None:
        self._take_last_bytes()
        self._transport = None
        self._server.left(self)

    def end(self) -> None:
        """Disconnect at once; what was not read is lost."""
        if self._transport is not None:
            self._transport.abort()

    def subscribe(self, method: str, params: dict[str, Any]) -> dict[str, Any]:
        """Begin or end the notifications; returns the rate in force."""
        rate_hz = params.get("rate_hz", 5.0) if method == "subscribe" else 0.0
        fit = isinstance(rate_hz, int | float) and not isinstance(rate_hz, bool) and 0 <= rate_hz <= RATE_MOST_HZ
        if not fit or set(params) - {"rate_hz"}:
            raise RpcFault(jsonrpc.INVALID_PARAMS, f"expected rate_hz from 0 to {RATE_MOST_HZ:g}")
        self._rate_hz, self._sent = float(rate_hz), None
        return {"rate_hz": self._rate_hz}

    def ask_readings(self, params: dict[str, Any]) -> dict[str, Any]:
        """Begin the readings, ``every`` samples a point, or end them with 0; returns what is in force."""
        every, feed = params.get("every", 1), self._server.readings
        if not isinstance(every, int) or isinstance(every, bool) or not 0 <= every <= EVERY_MOST \
                or set(params) - {"every"}:
            raise RpcFault(jsonrpc.INVALID_PARAMS, f"expected every, a whole number from 0 to {EVERY_MOST}")
        self.no_readings()
        if every:
            backlog = Backlog(every)
            if feed is None or not feed.add(backlog):
                raise RpcFault(jsonrpc.REFUSED, "expected fewer clients with different stretches of readings")
            self._backlog = backlog
        return {"every": every}

    def no_readings(self) -> None:
        """End the readings of this client."""
        if self._backlog is not None and self._server.readings is not None:
            self._server.readings.remove(self._backlog)
        self._backlog = None

    def drain(self) -> None:
        """Write readings that wait, as many as the client takes."""
        if self._transport is None or self._backlog is None or self._transport.is_closing():
            return
        while self._transport.get_write_buffer_size() <= self._server.limits.unread_notify:
            line = self._backlog.take()
            if line is None:
                return
            self._transport.write(line)

    def resume_writing(self) -> None:
        self.drain()

    def notify(self, snapshot: Snapshot, texts: "_FieldTexts") -> None:
        """Write what changed since the last notification, where it is due and the client reads."""
        if self._transport is None or not self._rate_hz or not self._due(snapshot):
            return
        limits, unread = self._server.limits, self._transport.get_write_buffer_size()
        if unread > limits.unread_notify:
            self._dropped += 1
            self._server.lost_one()
            self._end_if_stalled(limits.unread_s)
            return
        self._unread_since_s = None
        shown = self._with_trend_when_due(snapshot)
        self._transport.write(texts.notification(shown, self._sent, self._dropped))
        self._sent = shown

    def _with_trend_when_due(self, snapshot: Snapshot) -> Snapshot:
        """Return the snapshot with the trend that the client has already, where a newer one is not due."""
        sent = self._sent
        if sent is None or snapshot.now_s - self._trend_s >= TREND_EVERY_S:
            self._trend_s = snapshot.now_s
            return snapshot
        return snapshot if snapshot.trend is sent.trend else replace(snapshot, trend=sent.trend)

    def _due(self, snapshot: Snapshot) -> bool:
        sent = self._sent
        if sent is None or snapshot.now_s - sent.now_s >= 1.0 / self._rate_hz - 1e-3:
            return True
        return any(getattr(sent, name) != getattr(snapshot, name) for name in URGENT)

    def _end_if_stalled(self, unread_s: float) -> None:
        now_s = self._loop.time()
        if self._unread_since_s is None:
            self._unread_since_s = now_s
        elif now_s - self._unread_since_s > unread_s:
            self.end()

    def _send(self, line: bytes) -> None:
        if self._transport is None or self._transport.is_closing():
            return
        self._transport.write(line)
        if self._transport.get_write_buffer_size() > self._server.limits.unread_most:
            self.end()

    def _turn(self) -> None:
        self._turning = self.talk.turn() and self._transport is not None
        if self._turning:
            self._loop.call_soon(self._turn)

    def _take_last_bytes(self) -> None:
        """Read what the client wrote before it went: a failed write of ours must not swallow its cut."""
        if self._transport is None:
            return
        descriptor = self._transport.get_extra_info("socket").fileno()
        if descriptor < 0:
            return
        try:
            data = os.read(descriptor, jsonrpc.LINE_LIMIT)
        except OSError:
            return
        if data:
            self.talk.receive(data, self._loop.time())


class _FieldTexts:
    """The JSON text of each field's last value, made once for all clients: a trend need not be written out twice."""

    def __init__(self) -> None:
        self._texts: dict[str, tuple[Any, str]] = {}

    def notification(self, snapshot: Snapshot, sent: Snapshot | None, dropped: int) -> bytes:
        """Return the line for a client whose last notification showed ``sent`` (None: everything is new)."""
        parts = []
        for name in FIELDS:
            value = getattr(snapshot, name)
            if sent is None or getattr(sent, name) != value:
                parts.append(f'"{name}":{self._text(name, value)}')
        whole = "true" if sent is None else "false"
        return (f'{{"jsonrpc":"2.0","method":"snapshot","params":{{"whole":{whole},"dropped":{dropped},'
                f'"fields":{{{",".join(parts)}}}}}}}\n').encode("ascii")

    def _text(self, name: str, value: Any) -> str:
        known = self._texts.get(name)
        if known is not None and known[0] is value:
            return known[1]
        try:
            # points of plots are plain tuples of floats and by far the largest fields: no need to walk them twice
            text = json.dumps(value if name in POINTS else plain(value), allow_nan=False, separators=(",", ":"))
        except ValueError:
            text = json.dumps(plain(value), allow_nan=False, separators=(",", ":"))
        self._texts[name] = (value, text)
        return text


def _credentials(transport: asyncio.Transport) -> tuple[int, int]:
    """Return (pid, uid) of the other end as the kernel knows them; -1 where it does not tell."""
    try:
        raw = transport.get_extra_info("socket").getsockopt(socket.SOL_SOCKET, socket.SO_PEERCRED, 12)
        pid, uid, _ = struct.unpack("3i", raw)
    except (OSError, AttributeError, struct.error):
        return -1, -1
    return pid, uid


async def _turns() -> None:
    """Let the loop finish what it has begun: transports that open or close take a few turns."""
    for _ in range(CLOSING_TURNS):
        await asyncio.sleep(0)


def _ignore(_: object) -> None:
    return None
