"""The server on the Unix socket: snapshots out, stops in, nobody slowed by anybody."""

import asyncio
import json
import os
import socket
from collections.abc import Awaitable, Callable
from contextlib import suppress
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from hvhost.publish import jsonrpc
from hvhost.publish.conversation import Peer
from hvhost.publish.local import LocalLimits, LocalServer
from hvhost.publish.readings import Figures, ReadingsFeed
from hvhost.publish.snapshot import Permission, Snapshot, TrendBucket
from hvhost.words.errors import CannotConnect
from tests.pictures.states import RUNNING
from tests.publish.test_readings import block as sample

CUT = b'\n{"jsonrpc":"2.0","id":9,"method":"cut"}\n'


class Bench:
    """A server in this loop, with what it was asked."""

    def __init__(self, path: Path, limits: LocalLimits | None = None) -> None:
        self.asked: list[str] = []
        self.gone: list[int] = []
        self.notes: list[str] = []
        self.server = LocalServer(str(path / "demo.sock"), self._handle, note=self.notes.append, limits=limits,
                                  peer_gone=lambda peer: self.gone.append(peer.number))

    def _handle(self, method: str, params: dict[str, Any], peer: Peer) -> Any:
        self.asked.append(method)
        return {"uid": peer.uid, "pid": peer.pid}

    def connect(self) -> socket.socket:
        """Return a connected, non-blocking client socket."""
        client = socket.socket(socket.AF_UNIX)
        client.connect(self.server.path)
        client.setblocking(False)
        return client


async def turns(count: int = 12) -> None:
    """Let the loop take what is there; no time passes."""
    for _ in range(count):
        await asyncio.sleep(0)


def serve(path: Path, body: Callable[[Bench], Awaitable[None]], limits: LocalLimits | None = None) -> Bench:
    """Run ``body`` against an open server."""
    bench = Bench(path, limits)

    async def run() -> None:
        await bench.server.open()
        try:
            await body(bench)
        finally:
            await bench.server.close()

    asyncio.run(run())
    return bench


def lines(client: socket.socket) -> list[dict[str, Any]]:
    """Return everything that has come, decoded."""
    data = b""
    try:
        while part := client.recv(1_000_000):
            data += part
    except BlockingIOError:
        pass
    return [json.loads(line) for line in data.split(b"\n") if line]


def request(method: str, params: dict[str, Any]) -> bytes:
    """Return a request line with id 1."""
    return json.dumps({"jsonrpc": "2.0", "id": 1, "method": method, "params": params}).encode() + b"\n"


def subscribe(rate_hz: float = 10.0) -> bytes:
    """Return a subscription."""
    return request("subscribe", {"rate_hz": rate_hz})


def at(now_s: float, **changes: Any) -> Snapshot:
    """Return the running snapshot at a time."""
    return replace(RUNNING, now_s=now_s, seq=int(now_s * 1000), **changes)


def test_a_command_reaches_the_handler_with_its_peer(tmp_path: Path) -> None:
    """The peer's uid and pid are the kernel's word, and who came and went is noted."""
    async def body(bench: Bench) -> None:
        with bench.connect() as client:
            client.send(b'{"jsonrpc":"2.0","id":1,"method":"status"}\n')
            await turns()
            assert lines(client)[0]["result"] == {"uid": os.getuid(), "pid": os.getpid()}
        await turns()

    bench = serve(tmp_path, body)
    assert bench.asked == ["status"]
    assert bench.gone == [1]
    assert [note.split(") ")[1] for note in bench.notes] == ["connected", "left"]
    assert f"uid {os.getuid()}" in bench.notes[0]


def test_a_subscriber_gets_everything_once_and_then_what_changed(tmp_path: Path) -> None:
    """The first notification is whole; the next ones hold only the fields that differ."""
    async def body(bench: Bench) -> None:
        with bench.connect() as client:
            client.send(subscribe())
            await turns()
            bench.server.offer_nowait(at(1.0))
            bench.server.offer_nowait(at(1.2, set_volts=17e3))
            await turns()
            answer, first, second = lines(client)
            assert answer["result"] == {"rate_hz": 10.0}
            assert first["params"]["whole"] is True
            assert Snapshot.from_json(first["params"]["fields"]) == at(1.0)
            assert set(second["params"]["fields"]) == {"now_s", "seq", "set_volts"}

    serve(tmp_path, body)


def test_the_rate_is_kept_but_for_what_is_urgent(tmp_path: Path) -> None:
    """A slow watcher is spared ripple, and told of a trip at once."""
    async def body(bench: Bench) -> None:
        with bench.connect() as client:
            client.send(subscribe(1.0))
            await turns()
            for n in range(10):
                bench.server.offer_nowait(at(1.0 + n * 0.1))
            bench.server.offer_nowait(at(1.95, latched=("breakdown",), permission=Permission.IDLE))
            await turns()
            seqs = [one["params"]["fields"]["seq"] for one in lines(client)[1:]]
            assert seqs == [1000, 1950]

    serve(tmp_path, body)


def test_the_trend_is_sent_once_a_second(tmp_path: Path) -> None:
    """The large field is spared the wire at full rate and is never more than a second behind."""
    async def body(bench: Bench) -> None:
        with bench.connect() as client:
            client.send(subscribe(10.0))
            await turns()
            for n in range(13):
                bench.server.offer_nowait(at(1.0 + n * 0.1, trend=RUNNING.trend[: n + 1]))
            await turns()
            carried = [len(one["params"]["fields"]["trend"]) for one in lines(client)[1:]
                       if "trend" in one["params"]["fields"]]
            assert carried == [1, 11]

    serve(tmp_path, body)


def test_a_trend_with_holes_is_sent_too(tmp_path: Path) -> None:
    """A value that is no number becomes null and does not end the notifications."""
    async def body(bench: Bench) -> None:
        with bench.connect() as client:
            client.send(subscribe(10.0))
            await turns()
            bench.server.offer_nowait(at(1.0, trend=(TrendBucket(1.0, float("nan"), 1.0, 2.0, 3.0),)))
            await turns()
            assert lines(client)[1]["params"]["fields"]["trend"] == [[1.0, None, 1.0, 2.0, 3.0]]

    serve(tmp_path, body)


def test_unsubscribing_ends_the_notifications(tmp_path: Path) -> None:
    """A view that has enough gets no more."""
    async def body(bench: Bench) -> None:
        with bench.connect() as client:
            client.send(subscribe() + b'{"jsonrpc":"2.0","id":2,"method":"unsubscribe"}\n')
            await turns()
            bench.server.offer_nowait(at(1.0))
            await turns()
            assert [one["id"] for one in lines(client)] == [1, 2]

    serve(tmp_path, body)


@pytest.mark.parametrize("params", [{"rate_hz": 1000}, {"rate_hz": "fast"}, {"rate_hz": True}, {"rate_hz": -1},
                                    {"every": 1}])
def test_a_wrong_rate_is_refused(tmp_path: Path, params: dict[str, Any]) -> None:
    """Nobody subscribes faster than the bound, or by a name we do not know."""
    async def body(bench: Bench) -> None:
        with bench.connect() as client:
            client.send(request("subscribe", params))
            await turns()
            assert lines(client)[0]["error"]["code"] == jsonrpc.INVALID_PARAMS

    serve(tmp_path, body)


def test_the_snapshot_can_be_asked_for(tmp_path: Path) -> None:
    """A script takes one picture without a subscription; before the first there is none."""
    async def body(bench: Bench) -> None:
        with bench.connect() as client:
            client.send(request("snapshot", {}))
            await turns()
            bench.server.offer_nowait(at(3.0))
            client.send(request("snapshot", {}))
            await turns()
            none, one = lines(client)
            assert none["result"] is None
            assert Snapshot.from_json(one["result"]) == at(3.0)

    serve(tmp_path, body)


def test_a_stalled_client_loses_notifications_and_slows_nobody(tmp_path: Path) -> None:
    """S12, S7: one client reads nothing while thousands of snapshots pass; another gets them, and both can cut."""
    async def body(bench: Bench) -> None:
        with bench.connect() as stalled, bench.connect() as reading:
            stalled.send(subscribe(20.0))
            reading.send(subscribe(20.0))
            await turns()
            got = 0
            for n in range(2000):
                bench.server.offer_nowait(at(n * 1.0, trend=RUNNING.trend[: n % 150]))
                if n % 4 == 0:
                    await turns(3)
                    got += sum("method" in one for one in lines(reading))
            await turns()
            got += sum("method" in one for one in lines(reading))
            assert got == 2000
            view = bench.server.view()
            assert view.dropped > 1500
            assert view.clients == 2
            stalled.send(CUT)
            await turns()
            assert bench.asked == ["cut"]
            received = lines(stalled)
            assert len(received) < 500

    serve(tmp_path, body)


def test_a_client_that_leaves_too_much_unread_is_disconnected(tmp_path: Path) -> None:
    """S11: answers that nobody reads do not pile up without bound."""
    async def body(bench: Bench) -> None:
        with bench.connect() as client:
            bench.server.offer_nowait(at(1.0))
            for _ in range(100):
                try:
                    client.send(b'{"jsonrpc":"2.0","id":1,"method":"snapshot"}\n')
                except (BrokenPipeError, ConnectionResetError):
                    break
                await turns(4)
            assert bench.server.view().clients == 0

    serve(tmp_path, body, LocalLimits(unread_most=100_000))


def test_a_client_stalled_for_long_is_disconnected(tmp_path: Path) -> None:
    """A view that sleeps through its allowance is cut off, and may come back."""
    async def body(bench: Bench) -> None:
        with bench.connect() as client:
            client.send(subscribe(20.0))
            await turns()
            for n in range(1000):
                bench.server.offer_nowait(at(n * 1.0, trend=RUNNING.trend[: n % 150]))
            await turns()
            assert bench.server.view().clients == 0

    serve(tmp_path, body, LocalLimits(unread_s=-1.0))


def test_the_last_bytes_of_a_client_that_is_gone_still_cut(tmp_path: Path) -> None:
    """A view that dies right after its cut key is obeyed, though our write to it fails first."""
    async def body(bench: Bench) -> None:
        client = bench.connect()
        client.send(subscribe(20.0))
        await turns()
        client.send(CUT)
        client.close()
        bench.server.offer_nowait(at(1.0))  # before the loop has read anything: this write finds no reader
        await turns()
        assert bench.asked == ["cut"]
        assert bench.gone == [1]

    serve(tmp_path, body)


def test_too_many_clients_leave_room_for_stops(tmp_path: Path) -> None:
    """S7, S11: with every place taken and a thousand more knocking, a newcomer's cut is carried out."""
    async def body(bench: Bench) -> None:
        crowd = []
        for _ in range(20):
            crowd += [bench.connect() for _ in range(10)]
            await turns(4)
        with bench.connect() as late:
            late.send(b'{"jsonrpc":"2.0","id":1,"method":"status"}\n' + CUT)
            await turns()
            codes = [one["error"]["code"] for one in lines(late) if "error" in one]
            assert codes == [jsonrpc.STOPS_ONLY]
        assert bench.asked == ["cut"]
        assert bench.server.view().clients <= 4 + 9
        for one in crowd:
            one.close()

    serve(tmp_path, body, LocalLimits(clients=4, stops_only=8))


def test_nonsense_ends_nothing(tmp_path: Path) -> None:
    """S11: bytes of any kind are refused and counted; the next client is served."""
    async def body(bench: Bench) -> None:
        for junk in (b"\x00" * 100_000 + b"\n", b"GET / HTTP/1.1\r\n\r\n", b"[" * 5000 + b"\n", b"\n" * 50_000):
            with bench.connect() as client:
                sent = 0
                while sent < len(junk):
                    with suppress(BlockingIOError):
                        sent += client.send(junk[sent:])
                    await turns(3)
                await turns()
        with bench.connect() as client:
            client.send(CUT)
            await turns()
        assert bench.asked == ["cut"]

    serve(tmp_path, body)


def test_an_abusive_client_is_disconnected(tmp_path: Path) -> None:
    """A client that does nothing but break the rules is shown out."""
    async def body(bench: Bench) -> None:
        with bench.connect() as client:
            for _ in range(30):
                with suppress(BlockingIOError, BrokenPipeError, ConnectionResetError):
                    client.send(b"nonsense\n" * 2000)
                await turns(4)
            assert bench.server.view().clients == 0

    serve(tmp_path, body)


def test_a_second_server_is_refused_and_the_first_goes_on(tmp_path: Path) -> None:
    """Another daemon on this bench is told so and harms nothing."""
    async def body(bench: Bench) -> None:
        other = Bench(tmp_path)
        with pytest.raises(CannotConnect):
            await other.server.open()
        with bench.connect() as client:
            client.send(CUT)
            await turns()
        assert bench.asked == ["cut"]

    serve(tmp_path, body)


def test_closing_leaves_nothing_behind(tmp_path: Path) -> None:
    """No socket, no lock, no connection stays; closing twice does nothing."""
    async def body(bench: Bench) -> None:
        client = bench.connect()
        await turns()
        await bench.server.close()
        await turns()
        assert client.recv(1) == b""
        client.close()

    bench = serve(tmp_path, body)
    assert os.listdir(tmp_path) == []
    assert bench.gone == [1]


FIGURES = Figures(v_zero=0.0, v_gain=1.0, i_zero=0.0, i_gain=1e-6, tick_hz=10_000.0, utc_ns=lambda tick: tick)


def with_readings(path: Path, body: Callable[[Bench], Awaitable[None]], limits: LocalLimits | None = None) -> None:
    """Run ``body`` against an open server that has readings."""
    bench = Bench(path, limits)
    bench.server.readings = ReadingsFeed(lambda: FIGURES)

    async def run() -> None:
        await bench.server.open()
        try:
            await body(bench)
        finally:
            await bench.server.close()

    asyncio.run(run())


def feed(bench: Bench, first: int, blocks: int, now_s: float) -> int:
    """Offer blocks and a snapshot; returns the next index."""
    assert bench.server.readings is not None
    for number in range(first, first + blocks):
        bench.server.readings.take(sample(32 * number, [number] * 32))
    bench.server.offer_nowait(at(now_s))
    return first + blocks


def test_whoever_asks_for_readings_gets_every_sample_until_it_asks_no_more(tmp_path: Path) -> None:
    """Readings come with the snapshots' beat and end with 0; nobody else gets them."""
    async def body(bench: Bench) -> None:
        with bench.connect() as client, bench.connect() as other:
            client.send(request("readings", {"every": 1}))
            await turns()
            feed(bench, 0, 3, 1.0)
            await turns()
            client.send(request("readings", {"every": 0}))
            await turns()
            feed(bench, 3, 3, 1.1)
            await turns()
            answer, block, end = lines(client)
            assert (answer["result"], end["result"]) == ({"every": 1}, {"every": 0})
            assert (block["params"]["points"], block["params"]["dropped"]) == (96, 0)
            assert lines(other) == []

    with_readings(tmp_path, body)


def test_a_reader_that_stalls_loses_the_oldest_readings_is_told_and_slows_nobody(tmp_path: Path) -> None:
    """Its backlog is bounded beside the socket's; what it reads at last says how much is gone."""
    async def body(bench: Bench) -> None:
        with bench.connect() as slow:
            slow.send(request("readings", {"every": 1}))
            await turns()
            at_block = 0
            for n in range(100):
                at_block = feed(bench, at_block, 100, 1.0 + n * 0.1)
                await turns(2)
            seen = lines(slow)
            for n in range(40):
                feed(bench, at_block + n, 1, 20.0 + n)
                await turns(2)
                seen += lines(slow)
            points = [one["params"]["points"] for one in seen[1:]]
            assert sum(points) + seen[-1]["params"]["dropped"] == 32 * (at_block + 40)
            assert seen[-1]["params"]["dropped"] > 32 * at_block / 2
            assert bench.server.view().dropped > 0

    with_readings(tmp_path, body)


@pytest.mark.parametrize("params", [{"every": -1}, {"every": 1.5}, {"every": True}, {"every": 10**6}, {"rate": 1}])
def test_a_wrong_stretch_is_refused(tmp_path: Path, params: dict[str, Any]) -> None:
    """Nobody asks for stretches out of bounds, or by a name we do not know."""
    async def body(bench: Bench) -> None:
        with bench.connect() as client:
            client.send(request("readings", params))
            await turns()
            assert lines(client)[0]["error"]["code"] == jsonrpc.INVALID_PARAMS

    with_readings(tmp_path, body)


def test_a_server_without_readings_says_so(tmp_path: Path) -> None:
    """An outlet that has none refuses the request and goes on."""
    async def body(bench: Bench) -> None:
        with bench.connect() as client:
            client.send(request("readings", {}))
            await turns()
            assert lines(client)[0]["error"]["code"] == jsonrpc.REFUSED

    serve(tmp_path, body)
