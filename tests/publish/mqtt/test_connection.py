"""One connection against a real broker: what the standard promises of it, TLS, passwords, access lists, hostile ends.

Statement numbers are those of MQTT Version 5.0 (OASIS Standard, 7 March 2019); 3.1.1 numbers its own differently.
"""

import asyncio
import contextlib
import re
import socket
from collections.abc import AsyncIterator, Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from hvhost.bench.broker import Broker, MqttVersion
from hvhost.publish.mqtt import connection as module
from hvhost.publish.mqtt.access import tls_of
from hvhost.publish.mqtt.connection import LARGEST_IN, Connection, Outgoing, connected
from hvhost.publish.mqtt.faults import NOT_AUTHORIZED, TAKEN_OVER, BrokerFault
from tests.publish.mqtt.fakebroker import ACCEPT, far_end
from tests.publish.mqtt.mosquitto import Certificates, Mosquitto
from tests.publish.mqtt.scene import BROKER
from tests.publish.mqtt.wireclient import CONNACK, CONTENT_TYPE, DISCONNECT, EXPIRY, PUBLISH, WireClient, packet, text

Start = Callable[..., Mosquitto]
WILL = Outgoing(topic="lab/state", payload=b'{"state":"unknown"}', qos=1, retained=True)


def message(topic: str = "lab/x", payload: bytes = b"{}", qos: int = 1, retained: bool = False,
            expiry_s: int | None = None) -> Outgoing:
    """One message."""
    return Outgoing(topic=topic, payload=payload, qos=qos, retained=retained, expiry_s=expiry_s)


@contextlib.asynccontextmanager
async def connection(port: int, *, password: str | None = None, heard: list[tuple[str, bytes, bool]] | None = None,
                     **changes: Any) -> AsyncIterator[Connection]:
    """A connection to a port of this machine."""
    broker: Broker = replace(BROKER, port=port, **changes)
    kept = [] if heard is None else heard
    async with connected(broker, password=password, tls=tls_of(broker), will=WILL,
                         on_message=lambda *one: kept.append(one)) as one:
        yield one


def run(scene: Any) -> None:
    """Run a test's coroutine within a bounded time."""
    async def bounded() -> None:
        async with asyncio.timeout(30):
            await scene
    asyncio.run(bounded())


@pytest.mark.parametrize("version", list(MqttVersion))
def test_a_message_arrives_with_what_the_version_can_carry(broker: Mosquitto, version: MqttVersion) -> None:
    """MQTT 5 carries type and expiry (3.3.2-6: less the time waited); over 3.1.1 the payload arrives alone."""
    async def scene() -> None:
        async with connection(broker.port, version=version) as one:
            client = await WireClient.connect(broker.port)
            await client.subscribe("#")
            assert await one.publish(message(expiry_s=60), message("lab/y", qos=0)) == ""
            first, second = await client.next(), await client.next()
            assert (first.topic, first.payload, first.qos, second.topic, second.qos) == ("lab/x", b"{}", 1, "lab/y", 0)
            extras = {CONTENT_TYPE: b"application/json", EXPIRY: 60} if version is MqttVersion.V5 else {}
            assert {key: first.properties.get(key) for key in extras} == extras
            assert bool(first.properties) is (version is MqttVersion.V5)
            await client.close()
            await one.leave()
    run(scene())


@pytest.mark.parametrize("version", list(MqttVersion))
def test_the_will_comes_without_a_goodbye_and_stays(broker: Mosquitto, version: MqttVersion) -> None:
    """MQTT-3.1.2-7, -8, -15: a connection that just ends leaves its Will, retained, also for those who come later."""
    async def scene() -> None:
        client = await WireClient.connect(broker.port)
        await client.subscribe("lab/state")
        async with connection(broker.port, version=version):
            pass
        assert (await client.next()).payload == WILL.payload
        late = await WireClient.connect(broker.port)
        await late.subscribe("lab/state")
        assert (await late.next()).retained
        await client.close()
        await late.close()
    run(scene())


@pytest.mark.parametrize("version", list(MqttVersion))
def test_a_goodbye_takes_the_will_along(broker: Mosquitto, version: MqttVersion) -> None:
    """MQTT-3.14.4-3, -3.1.2-10: after DISCONNECT 0x00 the Will is forgotten; what was retained last stands."""
    async def scene() -> None:
        async with connection(broker.port, version=version) as one:
            await one.publish(message("lab/state", b'{"state":"idle"}', retained=True))
            await one.leave()
        client = await WireClient.connect(broker.port)
        await client.subscribe("lab/state")
        assert (await client.next()).payload == b'{"state":"idle"}'
        await client.close()
    run(scene())


def test_no_session_is_kept_and_none_is_resumed(broker: Mosquitto) -> None:
    """MQTT-3.1.2-4, -3.2.2-2: what is published while we are away does not come when we return."""
    async def scene() -> None:
        before = await WireClient.connect(broker.port, client=BROKER.client, clean=False, session_expiry=600)
        await before.subscribe("lab/command")
        await before.close(goodbye=False)
        other = await WireClient.connect(broker.port)
        await other.publish("lab/command", b"old")
        heard: list[tuple[str, bytes, bool]] = []
        for _ in range(2):
            async with connection(broker.port, heard=heard) as one:
                assert await one.subscribe("lab/command", commands=True) == ""
                await other.publish("lab/command", b"new")
                while not heard or heard[-1][1] != b"new":
                    await asyncio.sleep(0.005)
            await other.publish("lab/command", b"old")
        assert {payload for _, payload, _ in heard} == {b"new"}
        await other.close()
    run(scene())


def test_a_retained_command_does_not_come_and_one_sent_now_is_marked(broker: Mosquitto) -> None:
    """MQTT-3.3.1-11: Retain Handling 2 sends nothing stored; 3.3.1-13: Retain As Published keeps the flag."""
    async def scene() -> None:
        other = await WireClient.connect(broker.port)
        await other.publish("lab/command", b"stored", retained=True)
        heard: list[tuple[str, bytes, bool]] = []
        async with connection(broker.port, heard=heard) as one:
            await one.subscribe("lab/command", commands=True)
            await other.publish("lab/command", b"now", retained=True)
            while not heard:
                await asyncio.sleep(0.005)
            assert heard == [("lab/command", b"now", True)]
        await other.close()
    run(scene())


def test_over_the_older_version_a_stored_command_is_marked_as_such(broker: Mosquitto) -> None:
    """3.1.1 sends what is stored, with RETAIN 1; the flag is passed on for the judge."""
    async def scene() -> None:
        other = await WireClient.connect(broker.port)
        await other.publish("lab/command", b"stored", retained=True)
        heard: list[tuple[str, bytes, bool]] = []
        async with connection(broker.port, heard=heard, version=MqttVersion.V311) as one:
            await one.subscribe("lab/command", commands=True)
            while not heard:
                await asyncio.sleep(0.005)
        assert heard == [("lab/command", b"stored", True)]
        await other.close()
    run(scene())


def test_the_socket_sends_at_once(broker: Mosquitto, monkeypatch: pytest.MonkeyPatch) -> None:
    """TCP_NODELAY is on: small messages do not wait for the acknowledgement of the ones before."""
    async def scene() -> None:
        async with connection(broker.port) as one:
            sock = one._client._client.socket()
            assert sock is not None
            assert sock.getsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY)  # type: ignore[union-attr]
    run(scene())


# ---------------------------------------------------------------- who may


def test_a_broker_with_our_authoritys_certificate_is_trusted(start: Start, certificates: Certificates) -> None:
    """TLS with verification, and a client certificate that the broker asks for."""
    broker = start(tls(certificates, "broker") + "require_certificate true\n")

    async def scene() -> None:
        async with connection(broker.port, host="localhost", tls=True, ca=certificates.path("ca.pem"),
                              certificate=certificates.path("client.pem"), key=certificates.path("client.key")) as one:
            assert await one.publish(message()) == ""
            await one.leave()
    run(scene())


def tls(certificates: Certificates, name: str) -> str:
    """Lines of a listener with TLS."""
    return (f"allow_anonymous true\ncafile {certificates.path('ca.pem')}\ncertfile {certificates.path(name + '.pem')}\n"
            f"keyfile {certificates.path(name + '.key')}\n")


@pytest.mark.parametrize(("name", "words"), [("other", "certificate verify failed"),
                                             ("elsewhere", "Hostname mismatch")])
def test_a_strangers_certificate_is_refused(start: Start, certificates: Certificates, name: str, words: str) -> None:
    """Another authority's certificate, or ours for another name: no connection, and nothing was sent."""
    broker = start(tls(certificates, name))

    async def scene() -> None:
        with pytest.raises(BrokerFault, match=words):
            async with connection(broker.port, host="localhost", tls=True, ca=certificates.path("ca.pem")):
                pass
    run(scene())
    assert "New client connected" not in broker.log.read_text()


def test_a_broker_that_wants_a_certificate_refuses_us_without(start: Start, certificates: Certificates,
                                                              monkeypatch: pytest.MonkeyPatch) -> None:
    """A missing client certificate is a fault in words, not a traceback."""
    monkeypatch.setattr(module, "ANSWER_S", 1.0)
    broker = start(tls(certificates, "broker") + "require_certificate true\n")

    async def scene() -> None:
        with pytest.raises(BrokerFault):
            async with connection(broker.port, host="localhost", tls=True, ca=certificates.path("ca.pem")):
                pass
    run(scene())


def test_no_tls_where_the_broker_speaks_none(broker: Mosquitto) -> None:
    """TLS towards a plain port ends in a fault; there is no falling back to the clear."""
    async def scene() -> None:
        with pytest.raises(BrokerFault):
            async with connection(broker.port, host="localhost", tls=True):
                pass
    run(scene())
    assert "New client connected" not in broker.log.read_text()


PASSWORD_LINE = "bench:$7$101$"


@pytest.mark.parametrize("version", list(MqttVersion))
def test_a_wrong_password_is_said_without_it(start: Start, tmp_path: Any, version: MqttVersion) -> None:
    """Right user and password connect; a wrong one is refused in words that do not hold it."""
    import subprocess

    subprocess.run(["mosquitto_passwd", "-b", "-c", str(tmp_path / "passwords"), "bench", "right"], check=True)
    broker = start(f"allow_anonymous false\npassword_file {tmp_path / 'passwords'}\n")

    async def scene() -> None:
        async with connection(broker.port, user="bench", password="right", version=version) as one:
            await one.leave()
        with pytest.raises(BrokerFault) as caught:
            async with connection(broker.port, user="bench", password="wrong-word", version=version):
                pass
        assert caught.value.code == NOT_AUTHORIZED or "not authori" in str(caught.value)
        assert "wrong-word" not in str(caught.value)
    run(scene())


def test_a_forbidden_topic_is_told_and_the_connection_goes_on(start: Start, tmp_path: Any) -> None:
    """A PUBACK of 0x87 is no success (MQTT-4.4.0-2), a SUBACK of a failure is told; what is allowed still works."""
    (tmp_path / "acl").write_text("topic write lab/allowed\n")
    broker = start(f"allow_anonymous true\nacl_file {tmp_path / 'acl'}\n")

    async def scene() -> None:
        async with connection(broker.port) as one:
            assert await one.publish(message("lab/forbidden")) == "not authorized"
            assert await one.publish(message("lab/allowed"), message("lab/forbidden")) == "not authorized"
            assert await one.publish(message("lab/allowed")) == ""
            assert await one.subscribe("lab/command", commands=True) in ("", "not authorized")  # 2.0 grants, sends none
    run(scene())


@pytest.mark.parametrize("lacking", ["retain_available false", "max_qos 0"])
def test_a_broker_that_cannot_keep_our_promises_is_refused(start: Start, lacking: str) -> None:
    """MQTT-3.2.2-14 and -11: without retained messages or QoS 1 nothing is sent, and the reason is said."""
    before, extra = (f"{lacking}\n", "") if lacking.startswith("retain") else ("", f"{lacking}\n")
    broker = start("allow_anonymous true\n" + extra, before=before)

    async def scene() -> None:
        with pytest.raises(BrokerFault, match=r"(retain|qos) not supported"):  # it sees our Will
            async with connection(broker.port):
                pass
    run(scene())


@pytest.mark.parametrize("lacking", [b"\x24\0", b"\x25\0"])
def test_a_broker_that_only_says_so_is_refused_as_well(lacking: bytes) -> None:
    """The same where the CONNACK accepts us and names Maximum QoS 0 or Retain Available 0."""
    async def scene() -> None:
        async with far_end(packet(CONNACK, 0, b"\0\0\2" + lacking)) as port:
            with pytest.raises(BrokerFault, match="retained messages or QoS 1"):
                async with connection(port):
                    pass
    run(scene())


def test_a_message_longer_than_the_broker_takes_is_not_sent(start: Start) -> None:
    """The broker's Maximum Packet Size is kept: the message is refused here, and the connection stays."""
    broker = start("allow_anonymous true\n", before="max_packet_size 500\n")

    async def scene() -> None:
        async with connection(broker.port) as one:
            assert "500 bytes" in await one.publish(message(payload=b"x" * 600))
            assert await one.publish(message()) == ""
    run(scene())


# ---------------------------------------------------------------- hostile ends


def test_a_second_client_with_our_id_is_told_by_its_reason() -> None:
    """MQTT-3.1.4-3: DISCONNECT 0x8E comes through as what it is."""
    async def scene() -> None:
        async with far_end(ACCEPT, lambda kind, body: packet(DISCONNECT, 0, b"\x8e")) as port, connection(port) as one:
            ending = asyncio.ensure_future(one.wait_end())
            with contextlib.suppress(BrokerFault):
                await asyncio.wait({asyncio.ensure_future(one.publish(message())), ending},
                                   return_when=asyncio.FIRST_COMPLETED)
            with pytest.raises(BrokerFault) as caught:
                await ending
            assert (caught.value.code, caught.value.taken_over) == (TAKEN_OVER, True)
            assert "client id" in str(caught.value)
    run(scene())


def test_a_session_that_was_not_asked_for_is_refused() -> None:
    """MQTT-3.2.2-4: Session Present after a clean start ends the connection."""
    async def scene() -> None:
        async with far_end(packet(CONNACK, 0, b"\1\0\0")) as port:
            with pytest.raises(BrokerFault, match="session of an earlier connection"):
                async with connection(port):
                    pass
    run(scene())


def test_receive_maximum_narrows_the_window() -> None:
    """MQTT-3.3.4-7: no more messages are outstanding than the broker allows."""
    async def scene() -> None:
        async with far_end(packet(CONNACK, 0, b"\0\0\3\x21\0\3")) as port, connection(port) as one:
            assert one.window == 3
    run(scene())


@pytest.mark.parametrize("version", list(MqttVersion))
def test_a_packet_of_a_megabyte_is_not_gathered(version: MqttVersion) -> None:
    """A message far above what we take ends the connection as soon as its length is known; nothing is handed on."""
    properties = b"\0" if version is MqttVersion.V5 else b""
    huge = packet(PUBLISH, 0, text("lab/command") + properties + b"x" * 1_000_000)

    async def scene() -> None:
        heard: list[tuple[str, bytes, bool]] = []
        accept = ACCEPT if version is MqttVersion.V5 else packet(CONNACK, 0, b"\0\0")
        async with (far_end(accept, lambda kind, body: huge) as port,
                    connection(port, heard=heard, version=version) as one):
            sending = asyncio.ensure_future(one.publish(message(qos=0)))
            with pytest.raises(BrokerFault, match=str(LARGEST_IN)):
                await one.wait_end()
            await asyncio.gather(sending, return_exceptions=True)
        assert heard == []
    run(scene())


@pytest.mark.parametrize("answer", [b"\x20\x03\x00\x86\x00", b"\x20\x03\x00\x87\x00", b"\x20\x03\x00\x85\x00",
                                    b"\xff\xff\xff\xff\xff\xff", b"HTTP/1.1 400 Bad Request\r\n\r\n", b"\x20\x00",
                                    b"\x00", b"\x20\x7f"])
def test_any_answer_to_a_connect_is_a_fault_in_words(answer: bytes, monkeypatch: pytest.MonkeyPatch) -> None:
    """Refusals and garbage instead of a CONNACK are one error of ours; nothing else comes out, no socket is left."""
    monkeypatch.setattr(module, "ANSWER_S", 0.3)

    async def scene() -> None:
        async with far_end(answer) as port:
            with pytest.raises(BrokerFault) as caught:
                async with connection(port):
                    pass
            assert "expected a connection to the broker" in str(caught.value)
    run(scene())


def test_a_broker_that_does_not_answer_is_given_up(monkeypatch: pytest.MonkeyPatch) -> None:
    """No CONNACK, or no PUBACK: the attempt ends after its time."""
    monkeypatch.setattr(module, "ANSWER_S", 0.2)

    async def scene() -> None:
        for answer in (b"", ACCEPT):
            async with far_end(answer) as port:
                with pytest.raises(BrokerFault, match="no answer"):
                    async with connection(port) as one:
                        await one.publish(message())
    run(scene())


def test_one_file_knows_the_client_library() -> None:
    """Nothing else that runs a bench imports it (what measures sets a bare client beside it)."""
    package = Path(module.__file__).parents[2]
    knowing = {path.name for path in package.rglob("*.py") if path.parent.name != "speed"
               and re.search(r"^\s*(import|from) (aiomqtt|paho)", path.read_text("utf-8"), re.MULTILINE)}
    assert knowing == {"connection.py"}


def test_nobody_there_is_a_fault() -> None:
    """A port that nobody listens on, and a name that does not exist."""
    async def scene() -> None:
        with pytest.raises(BrokerFault, match="refused"):
            async with connection(1):
                pass
        with pytest.raises(BrokerFault):
            async with connection(1883, host="no-such-host.invalid"):
                pass
    run(scene())


def test_a_socket_that_is_closed_already_watches_nobody_elses() -> None:
    """The number of a closed socket is given to the next file: no reader or writer of ours may land on that one."""
    async def scene() -> None:
        client = module._client(BROKER, None, None, WILL)
        sock = socket.socket()
        number = sock.fileno()
        client._on_socket_open(None, None, sock)
        client._on_socket_register_write(None, None, sock)
        sock.close()
        with socket.socket() as stranger:
            assert stranger.fileno() == number
            await asyncio.sleep(0)
            await asyncio.sleep(0)
            loop = asyncio.get_running_loop()
            assert not loop.remove_reader(number)
            assert not loop.remove_writer(number)
    run(scene())


def test_a_cancellation_that_comes_with_the_answer_is_not_lost(broker: Mosquitto) -> None:
    """Whatever the moment at which the daemon ends, the task that sends ends too."""
    async def scene() -> None:
        async with connection(broker.port) as one:
            for turns in range(40):
                async def send_for_ever() -> None:
                    while True:
                        await one.subscribe("lab/command", commands=True)
                        await one.publish(message())
                task = asyncio.create_task(send_for_ever())
                await asyncio.sleep(0.0005 * turns)
                task.cancel()
                with pytest.raises(asyncio.CancelledError):
                    await task
    run(scene())


def test_cancelled_while_connecting_leaves_no_socket(monkeypatch: pytest.MonkeyPatch) -> None:
    """The daemon may end at any moment; the thread that connects is waited for, and its socket closed."""
    async def scene() -> None:
        async with far_end(b"") as port:
            async def enter() -> None:
                async with connection(port):
                    pass
            for turns in (1, 2, 5, 20):
                task = asyncio.create_task(enter())
                for _ in range(turns):
                    await asyncio.sleep(0)
                task.cancel()
                with pytest.raises(asyncio.CancelledError):
                    await task
    monkeypatch.setattr(module, "CONNECT_S", 0.3)
    run(scene())
