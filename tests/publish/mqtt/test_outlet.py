"""The whole outlet against a real broker: what is sent fits the table, deaths and rivals, outages, stops."""

import asyncio
import json
import signal
import subprocess
import time
from pathlib import Path
from typing import Any

import jsonschema
import pytest

from hvhost.bench.broker import MqttVersion
from hvhost.publish.mqtt import connection as connecting
from hvhost.publish.mqtt import outlet as module
from hvhost.publish.mqtt.topics import TOPICS
from hvhost.publish.snapshot import LinkState, Permission, Phase
from tests.publish.mqtt.fakebroker import ACCEPT, far_end
from tests.publish.mqtt.mosquitto import Mosquitto, need_broker
from tests.publish.mqtt.scene import BASE, Scene
from tests.publish.mqtt.wireclient import CONTENT_TYPE, DISCONNECT, EXPIRY, Got, WireClient, packet

BY_NAME = {topic.name: topic for topic in TOPICS}


def run(scene: Any, timeout_s: float = 40.0) -> None:
    """Run a test's coroutine within a bounded time."""
    async def bounded() -> None:
        async with asyncio.timeout(timeout_s):
            await scene
    asyncio.run(bounded())


async def watching(port: int, what: str = "#", **more: Any) -> WireClient:
    """A client that sees everything, with the retain flag as published."""
    client = await WireClient.connect(port, **more)
    await client.subscribe(what)
    return client


def check(message: Got) -> dict[str, Any]:
    """The payload, after the table has taken message and payload."""
    topic = BY_NAME[message.topic.removeprefix(BASE)]
    jsonschema.validate(message.data, topic.schema())
    assert topic.sent
    assert (message.qos, message.retained) == (topic.qos, topic.retained)
    assert not any(isinstance(value, dict | list) or value is None for value in message.data.values())
    return message.data


async def session_of(scene: Scene, client: WireClient) -> str:
    """The session that stands, once commands are subscribed."""
    await scene.until(lambda: any("connected to" in words for words in scene.host.said))
    states = [m.data for m in client.got if m.topic == BASE + "state" and m.data["available"]]
    return str(states[-1]["session"])


def order(session: str, counter: int = 1, **changes: Any) -> dict[str, Any]:
    """A good command."""
    return {"session": session, "counter": counter, "expires": time.time_ns() + 5_000_000_000, "from": "desk"} | changes


def test_everything_that_is_sent_fits_the_table(broker: Mosquitto, tmp_path: Path) -> None:
    """Every topic of the table is sent, fits its schema, is retained or not, and expires as the table says."""
    async def scene() -> None:
        one = Scene(tmp_path, port=broker.port)
        client = await watching(broker.port)
        async with one.serving():
            one.offer("first")
            await one.until(lambda: one.outlet.view().clients)
            assert type(one.outlet.view().clients) is int  # a screen refuses a count that is a truth value
            for _ in range(4):
                one.offer("more", after_s=0.2, permission=Permission.RUNNING, phase=Phase.RAMP)
                await one.until(lambda: one.outlet._telemetry is None)
            session = await session_of(one, client)
            await client.publish(BASE + "command/cut", order(session))
            await client.next("answer")
            await one.until(lambda: one.outlet.waiting.queue.waiting == 0)
        await client.close()
        for message in client.got:
            if "/command/" not in message.topic:
                check(message)
        names = {message.topic.removeprefix(BASE) for message in client.got}
        assert names >= {topic.name for topic in TOPICS if topic.sent}
        expiries = {message.topic.removeprefix(BASE): message.properties.get(EXPIRY) for message in client.got[:-1]
                    if message.data.get("available") is not False}
        assert {name: expiries[name] for name in ("state", "description", "event", "answer", "telemetry")} == {
            "state": 60, "description": None, "event": 7 * 86_400, "answer": 60, "telemetry": 5}
        assert {message.properties[CONTENT_TYPE] for message in client.got if "command" not in message.topic} == {
            b"application/json"}
        for name in ("state", "telemetry"):
            numbers = [m.data["seq"] for m in client.got if m.topic == BASE + name]
            assert numbers == list(range(len(numbers)))
    run(scene())


def test_birth_comes_first_and_an_orderly_end_says_unknown(broker: Mosquitto, tmp_path: Path) -> None:
    """The first message of a session is the retained state; the last one says that nobody knows, never 'off'."""
    async def scene() -> None:
        one = Scene(tmp_path, port=broker.port)
        client = await watching(broker.port)
        async with one.serving():
            one.offer()
            await session_of(one, client)
        birth, death = client.got[0], await client.next("state")
        assert (birth.topic, birth.retained, birth.data["available"]) == (BASE + "state", True, True)
        while death.data["available"]:
            death = await client.next("state")
        assert (death.data["state"], death.retained) == ("unknown", True)
        assert death.data["alarm"] == "the daemon ended"
        assert death.data["session"] == birth.data["session"]
        late = await watching(broker.port)
        assert (await late.next("state")).data == death.data
        await client.close()
        await late.close()
    run(scene())
    assert "Received DISCONNECT from lab-b1" in broker.log.read_text()


def test_an_old_death_does_not_overwrite_a_new_birth(broker: Mosquitto, tmp_path: Path) -> None:
    """A Will of an earlier session that comes late is answered with the present state, retained again."""
    async def scene() -> None:
        one = Scene(tmp_path, port=broker.port)
        client = await watching(broker.port)
        async with one.serving():
            one.offer()
            session = await session_of(one, client)
            await client.publish(BASE + "state", {"t": 1, "seq": 0, "session": "0" * 16 + "-1", "available": False,
                                                  "state": "unknown"}, retained=True)
            while (again := await client.next("state")).data["session"] != session or not again.data["available"]:
                pass
            late = await watching(broker.port)
            while (stands := await late.next("state")).data["session"] != session:
                pass
            assert stands.data["available"]
            await late.close()
        await client.close()
        assert not one.outlet.tell.taken_over
    run(scene())


def test_a_daemon_that_is_killed_leaves_its_will(broker: Mosquitto, tmp_path: Path) -> None:
    """The socket ends without a goodbye: the retained state says 'unknown' with the session that died."""
    async def scene() -> None:
        one = Scene(tmp_path, port=broker.port)
        client = await watching(broker.port)
        async with one.serving():
            one.offer()
            session = await session_of(one, client)
            assert one.outlet._connection is not None
            one.outlet._connection._client.drop()
            while (death := await client.next("state")).data["available"]:
                pass
            assert (death.data["state"], death.data["session"]) == ("unknown", session)
            assert EXPIRY not in death.properties
        await client.close()
    run(scene())


def test_the_state_follows_and_is_renewed(broker: Mosquitto, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A change goes out at once, no change goes out at its renewal only; a lost link is 'unknown'."""
    monkeypatch.setattr(module.topics, "STATE_EVERY_S", 0.2)

    async def scene() -> None:
        one = Scene(tmp_path, port=broker.port)
        client = await watching(broker.port, BASE + "state")
        async with one.serving():
            one.offer()
            await one.until(lambda: one.outlet.view().clients)
            for permission, phase in ((Permission.RUNNING, Phase.HOLD), (Permission.LOWERING, Phase.NONE)):
                one.offer(permission=permission, phase=phase)
                word = str(phase or permission)
                while (await client.next()).data["state"] != word:
                    pass
            one.offer(link=LinkState.LOST, reading=None)
            while (await client.next()).data["state"] != "unknown":
                pass
            assert (await client.next()).data["available"], "the renewal"
        await client.close()
    run(scene())


# ---------------------------------------------------------------- events


def test_events_wait_for_a_broker_and_for_the_next_daemon(tmp_path: Path) -> None:
    """Offered with no broker and two daemons later: all come, in order, with ids that repeats can be dropped by."""
    need_broker()
    broker = Mosquitto(tmp_path / "broker")

    async def scene() -> None:
        first = Scene(tmp_path, port=broker.port)
        async with first.serving():
            for n in range(30):
                first.offer(f"event {n}")
            await first.until(lambda: first.outlet.waiting.queue.last == 30)
        second = Scene(tmp_path, port=broker.port)
        broker.start()
        client = await watching(broker.port, BASE + "event")
        async with second.serving():
            second.offer("event 30")
            await second.until(lambda: second.outlet.waiting.queue.delivered == 31)
        await client.close()
        got = [check(message) for message in client.got]
        assert [one["text"] for one in got] == [f"event {n}" for n in range(31)]
        assert [one["seq"] for one in got] == list(range(1, 32))
        assert len({one["id"] for one in got}) == 31
    try:
        run(scene())
    finally:
        broker.kill()


def test_a_backlog_is_delivered_while_state_and_telemetry_go_on(broker: Mosquitto, tmp_path: Path) -> None:
    """Eight hundred events wait: telemetry is not held up behind them, and the loop is never held for long."""
    async def scene() -> None:
        one = Scene(tmp_path, port=broker.port)
        for n in range(1, 801):
            one.outlet.waiting.add(n, module.Severity.NOTE, f"event {n}")
        client = await watching(broker.port)
        async with one.serving():
            while one.outlet.waiting.queue.waiting or one.outlet.waiting.queue.last < 800:
                one.offer(after_s=0.1)
                await asyncio.sleep(0.02)
            await one.until(lambda: sum(m.topic == BASE + "event" for m in client.got) == 800)
        kinds = [m.topic.removeprefix(BASE) for m in client.got]
        first, last = kinds.index("event"), len(kinds) - kinds[::-1].index("event")
        assert kinds[first:last].count("telemetry") >= 2
        assert [m.data["seq"] for m in client.got if m.topic == BASE + "event"] == list(range(1, 801))
        await client.close()
    run(scene())


def test_events_that_the_broker_refuses_are_kept(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """An access list that forbids the topic: told once, nothing is dropped, everything comes once it is mended."""
    need_broker()
    monkeypatch.setattr(module, "REFUSED_S", (0.05, 0.1))
    acl = tmp_path / "acl"
    acl.write_text("topic write lab/v1/b1/state\ntopic read #\n")
    broker = Mosquitto(tmp_path / "broker", f"allow_anonymous true\nacl_file {acl}\n").start()

    async def scene() -> None:
        one = Scene(tmp_path, port=broker.port)
        client = await watching(broker.port, BASE + "event")
        async with one.serving():
            one.offer("one", "two", "three")
            await one.until(lambda: any("refuses lab/v1/b1/event: not authorized" in said for said in one.host.said))
            assert one.outlet.waiting.queue.waiting == 3
            acl.write_text("topic readwrite #\n")
            broker.signal(signal.SIGHUP)
            for word in ("one", "two", "three"):
                assert (await client.next()).data["text"] == word
        await client.close()
        assert one.outlet.view().failed > 0
    try:
        run(scene())
    finally:
        broker.kill()


def test_the_example_access_list_lets_each_do_its_part(tmp_path: Path) -> None:
    """With the shipped list everything is published, the desk may stop, and the viewer's stop goes nowhere."""
    need_broker()
    for user in ("bench", "desk", "viewer"):
        new = [] if (tmp_path / "passwords").exists() else ["-c"]
        subprocess.run(["mosquitto_passwd", "-b", *new, str(tmp_path / "passwords"), user, f"{user}-word"], check=True)
    (tmp_path / "word").write_text("bench-word\n")
    (tmp_path / "word").chmod(0o600)
    acl = Path(__file__).parents[3] / "configs" / "broker.acl"
    broker = Mosquitto(tmp_path / "broker", f"allow_anonymous false\npassword_file {tmp_path / 'passwords'}\n"
                       f"acl_file {acl}\n").start()

    async def scene() -> None:
        one = Scene(tmp_path, port=broker.port, root="hvhost", station="demo", user="bench",
                    password_file=str(tmp_path / "word"))
        desk = await watching(broker.port, user="desk", password="desk-word")
        viewer = await watching(broker.port, user="viewer", password="viewer-word")
        async with one.serving():
            one.offer("event")
            await one.until(lambda: any("connected to" in words for words in one.host.said))
            session = str([m.data for m in desk.got if m.topic.endswith("/state")][-1]["session"])
            good = order(session)
            assert await viewer.publish("hvhost/v1/demo/command/cut", good | {"from": "viewer"}) == 0x87
            assert await desk.publish("hvhost/v1/demo/command/cut", good) == 0
            assert (await viewer.next("answer")).data["accepted"]
            one.offer(after_s=0.2)
            await viewer.next("telemetry")
            await one.until(lambda: not one.outlet.waiting.queue.waiting)
        assert one.host.asked == [("cut", "mqtt:desk")]
        assert not [words for words in one.host.said if "refuse" in words or "cannot" in words]
        await desk.close()
        await viewer.close()
    try:
        run(scene())
    finally:
        broker.kill()


# ---------------------------------------------------------------- stops


@pytest.mark.parametrize("version", list(MqttVersion))
@pytest.mark.parametrize("command", ["lower", "cut"])
def test_a_stop_is_done_at_once_and_answered(broker: Mosquitto, tmp_path: Path, command: str,
                                             version: MqttVersion) -> None:
    """S7: a good command reaches the daemon with its sender's name before the broker's acknowledgement returns."""
    async def scene() -> None:
        one = Scene(tmp_path, port=broker.port, version=version)
        client = await watching(broker.port)
        async with one.serving():
            one.offer()
            session = await session_of(one, client)
            await client.publish(BASE + f"command/{command}", order(session))
            answer = check(await client.next("answer"))
            assert one.host.asked == [(command, "mqtt:desk")]
            assert (answer["command"], answer["accepted"]) == (command, True)
            assert (answer["counter"], answer["from"]) == (1, "desk")
            one.host.refuse = True
            await client.publish(BASE + f"command/{command}", order(session, 2))
            refused = check(await client.next("answer"))
            assert not refused["accepted"]
            assert "emergency switching off" in refused["text"]
        await client.close()
    run(scene())


def test_what_is_no_good_command_is_refused_answered_and_harmless(broker: Mosquitto, tmp_path: Path) -> None:
    """Retained, replayed, expired, of another session, hostile, huge or of any other name: nothing is done."""
    async def scene() -> None:
        one = Scene(tmp_path, port=broker.port)
        client = await watching(broker.port)
        stored = order("0" * 16 + "-1")
        await client.publish(BASE + "command/cut", stored, retained=True)
        async with one.serving():
            one.offer()
            session = await session_of(one, client)
            good = order(session, 7)
            cases: list[tuple[bytes | dict[str, Any], bool]] = [
                (good, True), (order(session, 7, expires=time.time_ns() - 1), False),
                (order("0" * 16 + "-1"), False), (order(session, 7, expires=time.time_ns() + 3_600_000_000_000), False),
                (b"cut", False), (b"[" * 500, False), (b"\0" * 400, False), (b"x" * 12_000, False), (b"", False)]
            for payload, retained in cases:
                await client.publish(BASE + "command/cut", payload, retained=retained)
                assert not check(await client.next("answer"))["accepted"]
            for name in ("arm", "set", "reset", "cut/now", "CUT"):
                await client.publish(BASE + f"command/{name}", good)
            await client.publish(BASE + "command/cut", b"x" * 1_000_000)
            await client.publish(BASE + "command/cut", good)
            assert check(await client.next("answer"))["accepted"]
            await client.publish(BASE + "command/cut", good)
            assert "counter" in check(await client.next("answer"))["text"]
            assert one.host.asked == [("cut", "mqtt:desk")]
            assert one.outlet.orders.refused == len(cases) + 1
            one.offer()
            while (await client.next("state")).data.get("commands_refused", 0) != len(cases) + 1:
                pass
        await client.close()
    run(scene())


def test_without_leave_in_the_bench_file_no_command_is_even_read(broker: Mosquitto, tmp_path: Path) -> None:
    """``commands: no``: the topics are not subscribed, a good command does nothing."""
    async def scene() -> None:
        one = Scene(tmp_path, port=broker.port, commands=False)
        client = await watching(broker.port)
        async with one.serving():
            one.offer()
            session = await session_of(one, client)
            assert await client.publish(BASE + "command/cut", order(session)) == 0
            one.offer("after", after_s=0.2)
            await client.next("event")
            one.outlet._hear(BASE + "command/cut", json.dumps(order(session)).encode(), False)
        assert one.host.asked == []
        await client.close()
    run(scene())
    assert "command/cut (QoS" not in broker.log.read_text()


# ---------------------------------------------------------------- rivals, freezes, storms


def test_a_session_taken_over_is_an_alarm(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Reason 0x8E (MQTT-3.1.4-3): told, an event on disk, and no fight: the next attempt waits."""
    pauses: list[bool] = []
    monkeypatch.setattr(module.Backoff, "pause_s", lambda self, chance, taken_over: pauses.append(taken_over) or 60.0)

    async def scene() -> None:
        async with far_end(ACCEPT, lambda kind, body: packet(DISCONNECT, 0, b"\x8e")) as port:
            one = Scene(tmp_path, port=port)
            async with one.serving():
                one.offer()
                await one.until(lambda: pauses)
                await one.until(lambda: one.outlet.waiting.queue.last == 1)
                assert pauses == [True]
                assert one.outlet.tell.taken_over == 1
                (event,) = one.outlet.waiting.queue.read(0, 9)
                assert "session taken over" in json.loads(event[1])["text"]
                assert any("session taken over" in words for words in one.host.said)
    run(scene())


def test_a_rival_is_found_where_the_broker_gives_no_reason(broker: Mosquitto, tmp_path: Path,
                                                           monkeypatch: pytest.MonkeyPatch) -> None:
    """A second client with our id that comes back each time, on a broker that just closes: an alarm all the same."""
    monkeypatch.setattr(module.Backoff, "pause_s", lambda self, chance, taken_over: 0.05)

    async def scene() -> None:
        one = Scene(tmp_path, port=broker.port)
        async with one.serving():
            one.offer()
            for _ in range(10):
                await one.until(lambda: one.outlet.view().clients)
                rival = await WireClient.connect(broker.port, client="lab-b1")
                await one.until(lambda: not one.outlet.view().clients)
                await rival.close()
                if one.outlet.tell.standing:
                    break
            assert "client id lab-b1" in one.outlet.tell.standing
            client = await watching(broker.port, BASE + "state")
            while "lab-b1" not in (await client.next()).data.get("alarm", ""):
                pass
            await client.close()
    run(scene())


def test_another_daemon_on_our_station_is_an_alarm(broker: Mosquitto, tmp_path: Path) -> None:
    """Two daemons with different client ids and one station: each is told of the other."""
    async def scene() -> None:
        one, two = Scene(tmp_path, port=broker.port), Scene(tmp_path, port=broker.port, client="else",
                                                            queue=tmp_path / "else")
        async with one.serving():
            one.offer()
            await one.until(lambda: one.outlet.view().clients)
            async with two.serving():
                two.offer()
                await one.until(lambda: "station b1" in one.outlet.tell.standing)
                assert one.outlet.tell.standing
    run(scene())


def test_a_frozen_broker_stalls_nothing_and_grows_nothing(broker: Mosquitto, tmp_path: Path,
                                                          monkeypatch: pytest.MonkeyPatch) -> None:
    """SIGSTOP under load: the loop goes on, memory holds one interval, events go to disk, all of them come later."""
    monkeypatch.setattr(connecting, "ANSWER_S", 0.5)

    async def scene() -> None:
        one = Scene(tmp_path, port=broker.port)
        client = await watching(broker.port, BASE + "event")
        async with one.serving():
            one.offer("event 1")
            await client.next()
            broker.signal(signal.SIGSTOP)
            stalls = []
            for n in range(2, 202):
                before_s = time.monotonic()
                one.offer(f"event {n}", after_s=0.1)
                await asyncio.sleep(0.005)
                stalls.append(time.monotonic() - before_s)
            await one.until(lambda: not one.outlet.view().clients)
            await one.until(lambda: one.outlet.waiting.queue.last == 201)
            assert len(one.outlet.waiting._fresh) == 0
            assert sorted(stalls)[len(stalls) // 2] < 0.1, "the median: a loaded machine has stalls of its own"
            broker.signal(signal.SIGCONT)
            await one.until(lambda: one.outlet.waiting.queue.delivered == 201)
            seen: dict[str, int] = {}
            await one.until(lambda: len({m.data["id"] for m in client.got}) == 201)
            for message in client.got:
                seen.setdefault(message.data["id"], message.data["seq"])
            assert list(seen.values()) == list(range(1, 202))
        await client.close()
    run(scene())


def test_telemetry_that_cannot_leave_is_counted(tmp_path: Path) -> None:
    """S12: with a broker that takes the connection and then nothing, intervals are replaced and counted as dropped."""
    async def scene() -> None:
        async with far_end(ACCEPT, lambda kind, body: answered(kind, body, taken)) as port:
            one = Scene(tmp_path, port=port)
            async with one.serving():
                one.offer()
                await one.until(lambda: any("connected to" in words for words in one.host.said))
                one.offer(permission=Permission.LOWERING)
                await one.until(lambda: len(taken) == 3)
                for _ in range(20):
                    one.offer(after_s=0.2)
                assert one.outlet.view().dropped == 19
    taken: list[bytes] = []
    run(scene())


def answered(kind: int, body: bytes, taken: list[bytes]) -> bytes:
    """A far end that grants subscriptions and takes a state and a description; what comes then is not answered."""
    if kind == 8:
        return packet(9, 0, body[:2] + b"\0\1")
    if kind == 3:
        taken.append(body)
        at = 2 + int.from_bytes(body[:2], "big")
        return packet(4, 0, body[at:at + 2]) if len(taken) <= 2 else b""
    return b""
