"""One connection to a broker: the only file that knows the client library, and renames its errors.

The library hides things that matter here, so its client is extended at those places and nowhere else: the reason in an
acknowledgement (a refused publish looks like a success), what the broker offers in its CONNACK, the socket that stays
open after a failed attempt, and the number of a socket that was closed before the loop came to watch it: that number
may be another file's by then, such as the port of the bench.

Received messages go straight to ``on_message``, within the read callback: no queue, so no memory, and a stop waits for
nothing.
"""

import asyncio
import contextlib
import logging
import socket
import ssl
from collections.abc import AsyncIterator, Callable, Coroutine
from dataclasses import dataclass
from typing import Any, NoReturn, TypeVar

import aiomqtt
from paho.mqtt.client import MQTT_CLEAN_START_FIRST_ONLY, MQTTMessage
from paho.mqtt.packettypes import PacketTypes
from paho.mqtt.properties import Properties
from paho.mqtt.reasoncodes import ReasonCode
from paho.mqtt.subscribeoptions import SubscribeOptions

from hvhost.bench.broker import Broker, MqttVersion
from hvhost.publish.mqtt.faults import BAD_PASSWORD, NOT_AUTHORIZED, TAKEN_OVER, BrokerFault

ANSWER_S = 5.0  # a broker that does not answer within this time is taken for gone
CONNECT_S = 5.0
LEAVE_S = 1.0
LARGEST_IN = 16_384  # bytes of a packet that we take: commands are far shorter
WINDOW = 8  # acknowledgements outstanding: an hour's events in seconds, and no loop turn above a millisecond
FAILED = UNSPECIFIED = 0x80  # reason codes from here up are failures; this one is what a closed socket gives
REMEDIES = {BAD_PASSWORD: "see user and password", NOT_AUTHORIZED: "see the broker's access list",
            TAKEN_OVER: "another client uses our client id: give each station its own"}
_LOG = logging.getLogger("hvhost.mqtt.client")
_LOG.propagate = False  # what matters is said in our own words
_LOG.addHandler(logging.NullHandler())

T = TypeVar("T")
OnMessage = Callable[[str, bytes, bool], None]


@dataclass(frozen=True, slots=True, kw_only=True)
class Outgoing:
    """One message to be sent; ``expiry_s`` None for none."""

    topic: str
    payload: bytes
    qos: int
    retained: bool
    expiry_s: int | None = None


class _Client(aiomqtt.Client):
    """The library's client with its gaps closed."""

    on_payload: OnMessage
    offered: Properties | None = None
    session_present = False
    refused: list[ReasonCode]

    def _on_connect(self, client: Any, userdata: Any, flags: Any, reason_code: ReasonCode,
                    properties: Properties | None = None) -> None:
        self.offered, self.session_present = properties, bool(flags.session_present)
        super()._on_connect(client, userdata, flags, reason_code, properties)

    def _on_disconnect(self, client: Any, userdata: Any, flags: Any, reason_code: ReasonCode,
                       properties: Properties | None = None) -> None:
        super()._on_disconnect(client, userdata, flags, reason_code, properties)
        self._look_at_end()

    def _look_at_end(self) -> None:
        """The library may replace this future unread, or nobody may wait for it: then its end was no surprise."""
        if self._disconnected.done() and not self._disconnected.cancelled():
            self._disconnected.exception()

    def _on_publish(self, client: Any, userdata: Any, mid: int, reason_code: ReasonCode,
                    properties: Properties) -> None:
        if reason_code.value >= FAILED:
            self.refused.append(reason_code)
        super()._on_publish(client, userdata, mid, reason_code, properties)

    def _on_message(self, client: Any, userdata: Any, message: MQTTMessage) -> None:
        if len(message.payload) > LARGEST_IN:  # it lay whole in the socket's buffer
            raise OSError(f"a message above {LARGEST_IN} bytes")
        with contextlib.suppress(UnicodeDecodeError):  # a topic that is no UTF-8 is none of ours
            self.on_payload(message.topic, bytes(message.payload), message.retain)

    def _on_socket_open(self, client: Any, userdata: Any, sock: Any) -> None:
        """Called in the thread that connects; by the time the loop comes to it the socket may be closed again."""
        def watch() -> None:
            if sock.fileno() >= 0:
                self._loop.add_reader(sock.fileno(), self._read)
                self._misc_task = self._loop.create_task(self._misc_loop())
        self._loop.call_soon_threadsafe(watch)

    def _on_socket_register_write(self, client: Any, userdata: Any, sock: Any) -> None:
        def watch() -> None:
            if sock.fileno() >= 0:
                self._loop.add_writer(sock.fileno(), self._write)
        self._loop.call_soon_threadsafe(watch)

    def _read(self) -> None:
        """Read what is there.  Over 3.1.1 a broker knows no limit of ours: a longer packet ends the connection."""
        try:
            while True:
                self._client.loop_read()
                if self._client._in_packet["remaining_length"] > LARGEST_IN:
                    raise OSError(f"a packet above {LARGEST_IN} bytes")
                sock = self._client.socket()
                if not isinstance(sock, ssl.SSLSocket) or not sock.pending():  # TLS may hold what epoll cannot see
                    return
        except Exception as error:
            self._broken(error)

    def _write(self) -> None:
        try:
            self._client.loop_write()
        except Exception as error:
            self._broken(error)

    def _broken(self, error: Exception) -> None:
        if not self._disconnected.done():
            self._disconnected.set_exception(error)
        self._client._sock_close()

    def drop(self) -> None:
        """Close the socket and forget it, whatever state the attempt is in."""
        self._client._sock_close()
        self._look_at_end()


class Connection:
    """A connection that stands.  One task sends: a refusal is that of the messages just sent."""

    def __init__(self, client: _Client, where: str, version: MqttVersion) -> None:
        self._client, self._where, self._v5 = client, where, version is MqttVersion.V5
        self._properties: dict[int | None, Properties] = {}
        offered = client.offered
        self.window = min(WINDOW, int(getattr(offered, "ReceiveMaximum", WINDOW)))  # MQTT-3.3.4-7
        self.largest_out = int(getattr(offered, "MaximumPacketSize", 1 << 28))
        if client.session_present:
            raise BrokerFault("a session of an earlier connection, although a clean start was asked for", where)
        if not getattr(offered, "RetainAvailable", 1) or not getattr(offered, "MaximumQoS", 1):
            raise BrokerFault("a broker without retained messages or QoS 1", where, "neither state nor events can be "
                              "kept there: allow both")  # MQTT-3.2.2-11, -14

    async def publish(self, *messages: Outgoing) -> str:
        """Send messages in order and wait until the broker has taken all; return why one was refused, '' for none.

        Raises `BrokerFault` where the connection ends or nothing is answered in time.
        """
        self._client.refused.clear()
        if any(len(m.payload) + len(m.topic) + 64 > self.largest_out for m in messages):
            return f"longer than the {self.largest_out} bytes that the broker takes"
        await self._done(*(self._send(message) for message in messages))
        return "; ".join(sorted({str(reason).lower() for reason in self._client.refused}))

    async def _send(self, message: Outgoing) -> None:
        await self._client.publish(message.topic, message.payload, qos=message.qos, retain=message.retained,
                                   properties=self._extras(message.expiry_s), timeout=ANSWER_S)

    def _extras(self, expiry_s: int | None) -> Properties | None:
        if not self._v5:
            return None
        if expiry_s not in self._properties:
            self._properties[expiry_s] = publish_properties(expiry_s)
        return self._properties[expiry_s]

    async def subscribe(self, topic: str, commands: bool) -> str:
        """Ask for a topic; return why it was refused, '' where it was not.

        Of commands nothing that is stored is wanted (MQTT-3.3.1-11), and a retained one is to be seen as such
        (3.3.1-13); otherwise what is stored comes first, marked as retained (3.3.1-9, -12).  3.1.1 knows only the
        latter.
        """
        options = None
        if self._v5:
            options = SubscribeOptions(qos=1, noLocal=False, retainAsPublished=commands,
                                       retainHandling=2 if commands else 0)
        (granted,) = await self._done(
            self._client.subscribe(topic, qos=0 if options else 1, options=options, timeout=ANSWER_S))
        code = granted[0].value if isinstance(granted[0], ReasonCode) else granted[0]
        return "" if code < FAILED else str(granted[0]).lower()

    async def _done(self, *acts: Coroutine[Any, Any, T]) -> list[T]:
        """Begin in order, wait for all, give their results; raises `BrokerFault`.

        Each act is a task of its own: under Python 3.11 the library's waits may swallow a cancellation that comes
        with the answer, and a daemon that ends would wait for ever.
        """
        tasks = [asyncio.ensure_future(act) for act in acts]
        try:
            await asyncio.wait(tasks, return_when=asyncio.FIRST_EXCEPTION)
            return [task.result() for task in tasks if task.done()]
        except aiomqtt.MqttError as error:
            raise self._fault(error) from None
        finally:
            for task in tasks:
                task.cancel()
            await asyncio.gather(*tasks, return_exceptions=True)  # their errors were told, or come too late

    async def wait_end(self) -> NoReturn:
        """Wait until the connection ends and raise `BrokerFault` with the reason."""
        try:
            async for _ in self._client.messages:
                pass  # messages take the straight way; nothing is ever queued
        except aiomqtt.MqttError as error:
            raise self._fault(error) from None
        raise BrokerFault("an end", self._where)

    async def leave(self) -> None:
        """Say goodbye, so that the broker forgets the Will (MQTT-3.14.4-3); bounded, and no matter if it fails."""
        with contextlib.suppress(aiomqtt.MqttError, TimeoutError):
            async with asyncio.timeout(LEAVE_S):
                await self._client.__aexit__(None, None, None)

    def _fault(self, error: BaseException) -> BrokerFault:
        return fault_of(error, self._where)


def publish_properties(expiry_s: int | None) -> Properties:
    """What MQTT 5 adds to a message: its type, that it is text, and when it is stale."""
    extras = Properties(PacketTypes.PUBLISH)  # type: ignore[no-untyped-call]
    extras.ContentType = "application/json"
    extras.PayloadFormatIndicator = 1
    if expiry_s is not None:
        extras.MessageExpiryInterval = expiry_s
    return extras


def fault_of(error: BaseException, where: str) -> BrokerFault:
    """The library's error in our words."""
    inner = error.__cause__ if isinstance(error.__cause__, Exception) else error
    reason = getattr(inner, "rc", None)
    if isinstance(reason, ReasonCode):
        words = "an end without a reason" if reason.value == UNSPECIFIED else str(reason).lower()
        return BrokerFault(words, where, REMEDIES.get(reason.value, ""), reason.value)
    text = str(inner).strip() or type(inner).__name__
    return BrokerFault("no answer" if text == "Operation timed out" else text[:200], where)


def _client(broker: Broker, password: str | None, tls: ssl.SSLContext | None, will: Outgoing) -> _Client:
    """A client for one attempt: clean start, no kept session, small packets only."""
    v5 = broker.version is MqttVersion.V5
    properties = None
    if v5:
        properties = Properties(PacketTypes.CONNECT)  # type: ignore[no-untyped-call]
        properties.SessionExpiryInterval = 0
        properties.MaximumPacketSize = LARGEST_IN
        properties.ReceiveMaximum = WINDOW
    will_properties = None
    if v5:
        will_properties = Properties(PacketTypes.WILLMESSAGE)  # type: ignore[no-untyped-call]
        will_properties.ContentType = "application/json"
        will_properties.PayloadFormatIndicator = 1
    return _Client(
        broker.host, broker.port, username=broker.user or None, password=password, logger=_LOG,
        identifier=broker.client, protocol=aiomqtt.ProtocolVersion.V5 if v5 else aiomqtt.ProtocolVersion.V311,
        will=aiomqtt.Will(will.topic, will.payload, will.qos, will.retained, will_properties),
        clean_session=None if v5 else True,
        clean_start=True if v5 else MQTT_CLEAN_START_FIRST_ONLY, timeout=ANSWER_S,
        keepalive=max(1, round(broker.keep_alive_s)), max_queued_incoming_messages=1,
        max_queued_outgoing_messages=4 * WINDOW, properties=properties, tls_context=tls,
        socket_options=((socket.IPPROTO_TCP, socket.TCP_NODELAY, 1),))


@contextlib.asynccontextmanager
async def connected(broker: Broker, *, password: str | None, tls: ssl.SSLContext | None, will: Outgoing,
                    on_message: OnMessage) -> AsyncIterator[Connection]:
    """A connection as long as the block lasts; raises `BrokerFault`.

    The socket is closed at the end; without `leave` before, the broker sends the Will.
    """
    where = f"{broker.host}:{broker.port}"
    client = _client(broker, password, tls, will)
    client.refused, client.on_payload = [], on_message
    try:
        await _enter(client)
        yield Connection(client, where, broker.version)
    except aiomqtt.MqttError as error:
        raise fault_of(error, where) from None
    finally:
        client.drop()


async def _enter(client: _Client) -> None:
    """Connect; where we are cancelled meanwhile, wait for the thread that connects, so that no socket is left."""
    entering = asyncio.ensure_future(client.__aenter__())
    try:
        await asyncio.shield(entering)
    except asyncio.CancelledError:
        await asyncio.wait({entering}, timeout=CONNECT_S)
        entering.cancel()
        with contextlib.suppress(asyncio.CancelledError, aiomqtt.MqttError):
            await entering
        raise
