"""The MQTT outlet: takes snapshots without waiting, keeps events on disk, and talks to a broker when there is one.

Three things live apart.  ``offer_nowait`` runs in the daemon's loop and only notes what is due.  One task brings
events to the disk.  One task connects, sends one message after another and waits for each answer, so that a broker
that is slow, frozen or gone makes nothing grow: the newest state, one telemetry interval, and a file.

Commands are judged and carried out within the read callback (`orders`), before anything else is sent.
"""

import asyncio
import json
import math
import random
import secrets
import time
from collections import deque
from collections.abc import Callable, Mapping
from typing import Any

from hvhost import __version__
from hvhost.bench.model import Bench
from hvhost.publish.mqtt import topics
from hvhost.publish.mqtt.access import password_of, queue_folder, tls_of
from hvhost.publish.mqtt.backoff import Backoff
from hvhost.publish.mqtt.connection import Connection, Outgoing, connected
from hvhost.publish.mqtt.diskqueue import DiskQueue
from hvhost.publish.mqtt.faults import BrokerFault
from hvhost.publish.mqtt.messages import Payload, death_of, description_of, encode, state_of, telemetry_of, text
from hvhost.publish.mqtt.orders import Orders
from hvhost.publish.mqtt.telemetry import Interval, IntervalKeeper
from hvhost.publish.mqtt.telling import Teller
from hvhost.publish.mqtt.topics import Topic
from hvhost.publish.mqtt.waiting import Waiting
from hvhost.publish.outlet import Host
from hvhost.publish.snapshot import OutletView, Severity, Snapshot
from hvhost.words.errors import CannotConnect, HvhostError

READ_AT_ONCE = 64  # events fetched from disk with one call of its thread
BETWEEN_WINDOWS_S = 0.002  # while a backlog is delivered the loop has room for everything else
REFUSED_S = (5.0, 60.0)  # events refused by the broker are tried again: first and longest pause
REASSERT_S = 1.0
ANSWERS_KEPT = 20
TELEMETRY_EXPIRY_LEAST_S = 5
LEAVING_S = 2.0


class MqttOutlet:
    """One station on one broker."""

    name = "mqtt"

    def __init__(self, bench: Bench, host: Host, *, environment: Mapping[str, str],
                 now_s: Callable[[], float] = time.monotonic, utc_ns: Callable[[], int] = time.time_ns,
                 chance: Callable[[], float] = random.random) -> None:
        assert bench.broker is not None
        self.bench, self.broker, self.host = bench, bench.broker, host
        self._environment, self._now_s, self._utc_ns, self._chance = environment, now_s, utc_ns, chance
        self.orders = Orders()
        self.waiting = Waiting(DiskQueue(queue_folder(self.broker, environment), self.broker.queue_events), host.say)
        self.tell = Teller(self.broker.client, self.broker.station, say=host.say, record=self._record, now_s=now_s)
        self.sends = 0
        self._daemon = secrets.token_hex(8)
        self._connections = 0
        self._born_s = math.nan
        self._connection: Connection | None = None
        self._session = ""
        self._seq: dict[str, int] = {}
        self._keeper = IntervalKeeper(self.broker.telemetry_s)
        self._telemetry: tuple[Snapshot, Interval] | None = None
        self._snapshot: Snapshot | None = None
        self._state: Payload = {}
        self._state_sent: Payload = {}
        self._state_due_s = 0.0
        self._answers: deque[Payload] = deque(maxlen=ANSWERS_KEPT)
        self._wake = asyncio.Event()
        self._dropped = self._failed = 0
        self._events_from_s = 0.0
        self._refused_pause_s = REFUSED_S[0]
        self._proven = False  # the broker took an event on this connection: the window may open

    # ------------------------------------------------------------ the daemon's side

    def offer_nowait(self, snapshot: Snapshot) -> None:
        """Note what is due; nothing is sent here and nothing waits."""
        self._snapshot = snapshot
        self.waiting.pick(snapshot)
        interval = self._keeper.add(snapshot.now_s, snapshot.span)
        if interval is not None:
            self._dropped += self._telemetry is not None and self._connection is not None
            self._telemetry = (snapshot, interval)
        self._state = state_of(snapshot)
        self._wake.set()

    def view(self) -> OutletView:
        """What was not delivered, and whether a broker is there."""
        return OutletView(name=self.name, dropped=self._dropped + self.waiting.lost_in_all,
                          failed=self._failed + self.orders.refused, clients=int(self._connection is not None))

    # ------------------------------------------------------------ life

    async def serve(self) -> None:
        """Connect and deliver until cancelled; raises `RecordFault` where the queue's folder is unfit."""
        try:
            await self.waiting.open()
            async with asyncio.TaskGroup() as group:
                group.create_task(self.waiting.store())
                group.create_task(self._connect_for_ever())
        finally:
            await self.waiting.close()

    async def _connect_for_ever(self) -> None:
        backoff = Backoff()
        while True:
            taken_over = False
            self._born_s = math.nan
            try:
                await self._connect()
            except CannotConnect as fault:
                self._failed += 1
                self.tell.say(str(fault))
                if not math.isnan(self._born_s):  # the broker had taken us
                    backoff.stood(self._now_s() - self._born_s)
                    taken_over = self.tell.ended(fault, backoff.short)
            await asyncio.sleep(backoff.pause_s(self._chance(), taken_over))

    def _record(self, words: str) -> None:
        self.waiting.add(self._utc_ns(), Severity.ATTENTION, words, self._snapshot)

    # ------------------------------------------------------------ one connection

    async def _connect(self) -> None:
        password = await asyncio.to_thread(password_of, self.broker, self._environment)
        tls = await asyncio.to_thread(tls_of, self.broker)
        self._connections += 1
        self._session = f"{self._daemon}-{self._connections}"
        self._seq.clear()
        self._answers.clear()
        will = self._outgoing(topics.STATE, death_of(self._session, self._utc_ns(), 0, "the daemon is gone"))
        async with connected(self.broker, password=password, tls=tls, will=will, on_message=self._hear) as connection:
            try:
                await self._talk(connection)
            except asyncio.CancelledError:
                await self._leave(connection)
                raise
            finally:
                self._connection = None

    async def _talk(self, connection: Connection) -> None:
        """Birth first, so that whoever commands knows the session; then everything as it becomes due."""
        ending = asyncio.ensure_future(connection.wait_end())
        sending = asyncio.ensure_future(self._send_for_ever(connection))
        try:
            await asyncio.wait({ending, sending}, return_when=asyncio.FIRST_COMPLETED)
            for one in (ending, sending):  # the broker's own reason before the silence that it causes
                if one.done():
                    one.result()
        finally:
            for one in (ending, sending):
                one.cancel()
            await asyncio.gather(ending, sending, return_exceptions=True)

    async def _send_for_ever(self, connection: Connection) -> None:
        await self._be_born(connection)
        while True:
            self._wake.clear()
            self.waiting.stored.clear()
            if await self._send_due(connection):
                await asyncio.sleep(BETWEEN_WINDOWS_S)
                continue
            await self._wait_for_work()

    async def _wait_for_work(self) -> None:
        """Until something new is due; the timeout serves renewals and what was put off."""
        waits = {asyncio.ensure_future(self._wake.wait()), asyncio.ensure_future(self.waiting.stored.wait())}
        try:
            await asyncio.wait(waits, timeout=1.0, return_when=asyncio.FIRST_COMPLETED)
        finally:
            for one in waits:
                one.cancel()

    async def _be_born(self, connection: Connection) -> None:
        self._proven, self._events_from_s, self._refused_pause_s = False, 0.0, REFUSED_S[0]
        self._state_sent, self._telemetry, self._born_s = {}, None, self._now_s()
        await self._subscribe(connection, topics.STATE)
        await self._send_state(connection)
        about = description_of(self.bench, f"hvhost {__version__}", self.broker.telemetry_s, self.broker.commands)
        await self._publish(connection, topics.DESCRIPTION, about)
        self._connection = connection
        for topic in (topics.CUT, topics.LOWER) if self.broker.commands else ():
            await self._subscribe(connection, topic)
        self.tell.say(f"connected to {self.broker.host}:{self.broker.port} as {self.broker.client}")

    async def _subscribe(self, connection: Connection, topic: Topic) -> None:
        refusal = await connection.subscribe(self._topic(topic), commands=not topic.sent)
        if refusal:
            self._failed += 1
            self.tell.say(f"{self._topic(topic)} cannot be read: {refusal}")

    async def _leave(self, connection: Connection) -> None:
        """The last words of an orderly end; where they do not arrive in time the Will says the same."""
        self._connection = None
        words = {k: v for k, v in death_of(self._session, 0, 0, "the daemon ended").items() if k not in ("t", "seq")}
        try:
            async with asyncio.timeout(LEAVING_S):
                if not await self._publish(connection, topics.STATE, words):
                    await connection.leave()
        except (BrokerFault, TimeoutError):
            return

    # ------------------------------------------------------------ sending

    async def _send_due(self, connection: Connection) -> bool:
        """Send what is due, the urgent first; return whether more events wait."""
        while self._answers:
            await self._publish(connection, topics.ANSWER, self._answers.popleft())
        await self._send_state(connection)
        if self._telemetry is not None:
            (snapshot, interval), self._telemetry = self._telemetry, None
            await self._publish(connection, topics.TELEMETRY, telemetry_of(snapshot, interval))
        return await self._send_events(connection)

    async def _send_state(self, connection: Connection) -> None:
        """The state where it changed or its renewal is due; a countdown alone is worth a message a second."""
        state: Payload = dict(self._state) if self._state else {"available": True, "state": "unknown"}
        if self.tell.standing:
            state["alarm"] = text(self.tell.standing)
        if self.waiting.lost_in_all:
            state["events_lost"] = self.waiting.lost_in_all
        if self.orders.refused:
            state["commands_refused"] = self.orders.refused
        if "re_energises_in_s" in state:
            state["re_energises_in_s"] = float(round(state["re_energises_in_s"]))
        if state == self._state_sent and self._now_s() < self._state_due_s:
            return
        self._state_sent, self._state_due_s = state, self._now_s() + topics.STATE_EVERY_S
        await self._publish(connection, topics.STATE, state)

    async def _send_events(self, connection: Connection) -> bool:
        queue = self.waiting.queue
        if queue.delivered >= queue.last or self._now_s() < self._events_from_s:
            return False
        events = await self.waiting.call(queue.read, queue.delivered, READ_AT_ONCE)
        while events:
            window = connection.window if self._proven else 1
            some, events = events[:window], events[window:]
            topic, expiry_s = self._topic(topics.EVENT), topics.EVENT.expiry_s
            refusal = await connection.publish(*(Outgoing(topic=topic, payload=payload, qos=1, retained=False,
                                                          expiry_s=expiry_s) for _, payload in some))
            self.sends += len(some)
            if refusal:
                self._put_off_events(refusal)
                return False
            self._proven, self._refused_pause_s = True, REFUSED_S[0]
            await self.waiting.call(queue.deliver, some[-1][0])
            if self._answers or self._telemetry is not None:
                return True  # those first
            await asyncio.sleep(BETWEEN_WINDOWS_S)
        return queue.delivered < queue.last

    def _put_off_events(self, refusal: str) -> None:
        """A refused message is finished for the protocol (MQTT-4.4.0-2), not for us: it is sent anew, alone, later."""
        self._failed += 1
        self._proven = False
        self._events_from_s = self._now_s() + self._refused_pause_s
        self._refused_pause_s = min(REFUSED_S[1], 2.0 * self._refused_pause_s)
        self.tell.say(f"events wait: the broker refuses {self._topic(topics.EVENT)}: {refusal}")

    async def _publish(self, connection: Connection, topic: Topic, body: Payload) -> str:
        """Stamp and send one message that is not kept; a refusal is counted, told and returned."""
        payload = {"t": self._utc_ns(), "seq": self._seq.get(topic.name, 0), "session": self._session, **body}
        self._seq[topic.name] = payload["seq"] + 1
        refusal = await connection.publish(self._outgoing(topic, payload))
        if refusal:
            self._failed += 1
            self.tell.say(f"the broker refuses {self._topic(topic)}: {refusal}")
        return refusal

    def _outgoing(self, topic: Topic, payload: Payload) -> Outgoing:
        expiry_s = topic.expiry_s
        if topic is topics.TELEMETRY:
            expiry_s = max(TELEMETRY_EXPIRY_LEAST_S, round(2 * self.broker.telemetry_s))
        return Outgoing(topic=self._topic(topic), payload=encode(payload), qos=topic.qos, retained=topic.retained,
                        expiry_s=expiry_s)

    def _topic(self, topic: Topic) -> str:
        return topic.of(self.broker.root, self.broker.station)

    # ------------------------------------------------------------ hearing

    def _hear(self, topic: str, payload: bytes, retained: bool) -> None:
        """A message came: a command is carried out before this returns; anything else of ours is looked at."""
        if topic == self._topic(topics.STATE):
            self._hear_state(payload, retained)
        elif self.broker.commands:
            for one in (topics.CUT, topics.LOWER):
                if topic == self._topic(one):
                    self._command(one.name.partition("/")[2], payload, retained)

    def _command(self, command: str, payload: bytes, retained: bool) -> None:
        answer: Payload = {"command": command, "accepted": False}
        try:
            order = self.orders.take(command, payload, retained=retained, session=self._session, now_s=self._now_s(),
                                     utc_ns=self._utc_ns())
            answer |= {"counter": order.counter, "from": order.sender}
            done = self.host.ask(order.command, {}, f"mqtt:{order.sender}")
            answer |= {"accepted": True, "text": _said_of(order.command, done)}
        except HvhostError as error:
            answer["text"] = text(str(error))
            self.tell.say(f"a {command} was refused: {error}")
        self._answers.append(answer)
        self._wake.set()

    def _hear_state(self, payload: bytes, stored: bool) -> None:
        """Somebody else wrote our state: an old death is overwritten, another daemon is an alarm.

        What was stored when we came may be an earlier daemon's; once we have been here it is a rival's.
        """
        try:
            data = json.loads(payload.decode("utf-8"))
            session, available = str(data["session"]), data["available"] is True
        except (ValueError, KeyError, TypeError, RecursionError):
            session, available = "", False
        if session == self._session:
            return  # our own words come back
        if not session.startswith(self._daemon) and (self._connections > 1 if stored else available):
            self.tell.rival()
        elif not available and not stored:
            self._state_due_s = min(self._state_due_s, self._now_s() + REASSERT_S)
            self._wake.set()


def _said_of(command: str, done: Mapping[str, Any]) -> str:
    """What became of it so far; whether a cut is confirmed stands in the state (S7)."""
    if command == "lower":
        return "lowering" if done.get("lowering", True) else "nothing is energised"
    return text(str(done.get("text", "cut sent")))


def attach(bench: Bench, host: Host, environment: Mapping[str, Any]) -> MqttOutlet:
    """Offer snapshots to a new outlet and run its task."""
    outlet = MqttOutlet(bench, host, environment=environment)
    host.add_outlet(outlet)
    host.add_service("mqtt", outlet.serve)
    return outlet
