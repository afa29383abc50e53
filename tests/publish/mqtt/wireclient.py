"""A small MQTT client of the tests' own, 5 and 3.1.1: the judge shares no code with the accused and its library.

Packets as in MQTT Version 5.0, sections 2 and 3 (OASIS Standard, 7 March 2019).  It sees every property and can send
what a library would refuse to.
"""

import asyncio
import contextlib
import json
import ssl
from dataclasses import dataclass, field
from typing import Any

CONNECT, CONNACK, PUBLISH, PUBACK, SUBSCRIBE, SUBACK, PINGREQ, DISCONNECT = 1, 2, 3, 4, 8, 9, 12, 14
EXPIRY, PAYLOAD_FORMAT, CONTENT_TYPE = 0x02, 0x01, 0x03
SESSION_EXPIRY = 0x11
# property -> length of its value; 's' text, 'b' binary, 'v' variable byte integer, 'p' pair of texts
KINDS: dict[int, int | str] = {
    0x01: 1, 0x02: 4, 0x03: "s", 0x08: "s", 0x09: "b", 0x0B: "v", 0x11: 4, 0x12: "s", 0x13: 2, 0x15: "s", 0x16: "b",
    0x17: 1, 0x18: 4, 0x19: 1, 0x1A: "s", 0x1C: "s", 0x1F: "s", 0x21: 2, 0x22: 2, 0x23: 2, 0x24: 1, 0x25: 1, 0x26: "p",
    0x27: 4, 0x28: 1, 0x29: 1, 0x2A: 1}


@dataclass
class Got:
    """A message as it came."""

    topic: str
    payload: bytes
    qos: int
    retained: bool
    dup: bool
    properties: dict[int, Any] = field(default_factory=dict)

    @property
    def data(self) -> dict[str, Any]:
        """The payload as an object."""
        found = json.loads(self.payload)
        assert isinstance(found, dict)
        return found


def varint(number: int) -> bytes:
    """A variable byte integer (1.5.5)."""
    out = bytearray()
    while True:
        number, digit = divmod(number, 128)
        out.append(digit | (0x80 if number else 0))
        if not number:
            return bytes(out)


def text(value: str | bytes) -> bytes:
    """A length and UTF-8 (1.5.4)."""
    raw = value.encode() if isinstance(value, str) else value
    return len(raw).to_bytes(2, "big") + raw


def packet(kind: int, flags: int, body: bytes) -> bytes:
    """Fixed header and the rest (2.1)."""
    return bytes([kind << 4 | flags]) + varint(len(body)) + body


def read_varint(data: bytes, at: int) -> tuple[int, int]:
    """(number, offset behind it)."""
    number = shift = 0
    while True:
        byte = data[at]
        number |= (byte & 0x7F) << shift
        at, shift = at + 1, shift + 7
        if not byte & 0x80:
            return number, at


def read_properties(data: bytes, at: int) -> tuple[dict[int, Any], int]:
    """({property: value}, offset behind them)."""
    length, at = read_varint(data, at)
    end, found = at + length, {}
    while at < end:
        key, kind = data[at], KINDS[data[at]]
        at += 1
        if isinstance(kind, int):
            found[key] = int.from_bytes(data[at:at + kind], "big")
            at += kind
        elif kind == "v":
            found[key], at = read_varint(data, at)
        else:
            for _ in range(2 if kind == "p" else 1):
                size = int.from_bytes(data[at:at + 2], "big")
                found[key] = data[at + 2:at + 2 + size]
                at += 2 + size
    return found, at


class WireClient:
    """One connection; what comes is kept in ``got`` and in a queue."""

    def __init__(self, version: int = 5) -> None:
        self.version = version
        self.got: list[Got] = []
        self.fresh: asyncio.Queue[Got] = asyncio.Queue()
        self.acks: dict[int, int] = {}
        self.connack: tuple[int, int, dict[int, Any]] = (0, -1, {})
        self.ended = asyncio.Event()
        self.end_reason: int | None = None
        self._packet_id = 0
        self._answers: asyncio.Queue[tuple[int, int, list[int]]] = asyncio.Queue()
        self._writer: asyncio.StreamWriter
        self._task: asyncio.Task[None]

    @classmethod
    async def connect(cls, port: int, *, client: str = "", version: int = 5, clean: bool = True, user: str = "",
                      password: str = "", tls: ssl.SSLContext | None = None, keep_alive: int = 60,
                      session_expiry: int = 0, host: str = "127.0.0.1") -> "WireClient":
        """Connect and wait for the CONNACK."""
        one = cls(version)
        reader, one._writer = await asyncio.open_connection(host, port, ssl=tls)
        flags = 0x02 * clean | (0x80 if user else 0) | (0x40 if password else 0)
        body = text("MQTT") + bytes([version, flags]) + keep_alive.to_bytes(2, "big")
        if version == 5:
            body += varint(5) + bytes([SESSION_EXPIRY]) + session_expiry.to_bytes(4, "big") if session_expiry else b"\0"
        body += text(client) + (text(user) if user else b"") + (text(password) if password else b"")
        one._writer.write(packet(CONNECT, 0, body))
        one._task = asyncio.create_task(one._read(reader))
        kind, _, codes = await asyncio.wait_for(one._answers.get(), 10)
        assert kind == CONNACK, kind
        one.connack = (codes[0], codes[1], one.connack[2])
        return one

    async def _read(self, reader: asyncio.StreamReader) -> None:
        try:
            while True:
                first = (await reader.readexactly(1))[0]
                size = shift = 0
                while True:
                    byte = (await reader.readexactly(1))[0]
                    size |= (byte & 0x7F) << shift
                    shift += 7
                    if not byte & 0x80:
                        break
                self._take(first >> 4, first & 15, await reader.readexactly(size))
        except (asyncio.IncompleteReadError, OSError):
            pass
        finally:
            self.ended.set()
            self._answers.put_nowait((0, 0, []))

    def _take(self, kind: int, flags: int, body: bytes) -> None:
        if kind == CONNACK:
            self.connack = (body[0], body[1], read_properties(body, 2)[0] if self.version == 5 else {})
            self._answers.put_nowait((kind, 0, [body[0], body[1]]))
        elif kind == PUBLISH:
            self._publish_came(flags, body)
        elif kind in (PUBACK, SUBACK):
            number = int.from_bytes(body[:2], "big")
            codes = [body[2]] if kind == PUBACK and len(body) > 2 else [0] if kind == PUBACK else list(body[3:]) \
                if self.version == 5 else list(body[2:])
            self._answers.put_nowait((kind, number, codes))
        elif kind == DISCONNECT:
            self.end_reason = body[0] if body else 0

    def _publish_came(self, flags: int, body: bytes) -> None:
        size = int.from_bytes(body[:2], "big")
        topic, at, qos = body[2:2 + size].decode(), 2 + size, flags >> 1 & 3
        if qos:
            number, at = body[at:at + 2], at + 2
        properties: dict[int, Any] = {}
        if self.version == 5:
            properties, at = read_properties(body, at)
        message = Got(topic=topic, payload=body[at:], qos=qos, retained=bool(flags & 1), dup=bool(flags & 8),
                      properties=properties)
        self.got.append(message)
        self.fresh.put_nowait(message)
        if qos:
            self._writer.write(packet(PUBACK, 0, number))

    def _number(self) -> bytes:
        self._packet_id = self._packet_id % 65_535 + 1
        return self._packet_id.to_bytes(2, "big")

    async def _answer(self, kind: int) -> int:
        while True:
            found, _, codes = await asyncio.wait_for(self._answers.get(), 10)
            if found == kind:
                return codes[-1]
            if found == 0:
                raise ConnectionResetError

    async def subscribe(self, topic: str, qos: int = 1, options: int = 0x08) -> int:
        """Subscribe; return the reason code.  The default options keep the retain flag as published (3.8.3.1)."""
        body = self._number() + (b"\0" if self.version == 5 else b"") + text(topic)
        body += bytes([qos | options if self.version == 5 else qos])
        self._writer.write(packet(SUBSCRIBE, 2, body))
        return await self._answer(SUBACK)

    async def publish(self, topic: str, payload: bytes | dict[str, Any], qos: int = 1, retained: bool = False,
                      expiry_s: int | None = None) -> int:
        """Publish; return the reason code, 0 for QoS 0."""
        raw = payload if isinstance(payload, bytes) else json.dumps(payload).encode()
        body = text(topic) + (self._number() if qos else b"")
        if self.version == 5:
            extras = bytes([EXPIRY]) + expiry_s.to_bytes(4, "big") if expiry_s is not None else b""
            body += varint(len(extras)) + extras
        self._writer.write(packet(PUBLISH, qos << 1 | retained, body + raw))
        return await self._answer(PUBACK) if qos else 0

    def write(self, data: bytes) -> None:
        """Send any bytes."""
        self._writer.write(data)

    async def next(self, topic: str = "", timeout_s: float = 10.0) -> Got:
        """The next message, or the next of a topic that ends so; others are passed over."""
        async with asyncio.timeout(timeout_s):
            while True:
                message = await self.fresh.get()
                if message.topic.endswith(topic):
                    return message

    async def close(self, goodbye: bool = True) -> None:
        """Leave, with DISCONNECT or without."""
        if goodbye:
            self._writer.write(packet(DISCONNECT, 0, b""))
        self._writer.close()
        with contextlib.suppress(OSError, ssl.SSLError):
            await self._writer.wait_closed()
        await self._task
