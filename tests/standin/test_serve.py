"""Serving in real time: pace, stations, control socket."""

import asyncio
import os
import socket
from collections.abc import Callable
from pathlib import Path

import pytest

from hvhost.standin.params import demo
from hvhost.standin.plant import Plant
from hvhost.standin.serve import STALL_S, Control, Pace, Station, serve
from hvhost.standin.uart import Line, PtyLine, TcpLine
from hvhost.words.errors import CannotConnect


class FakeMcu:
    """What the status tells."""

    tick = state = latched = v_word = i_word = 0


class FakeBench:
    """A stand-in that says its tick and repeats what it hears."""

    def __init__(self) -> None:
        self.plant = Plant(demo(), 1)
        self.mcu = FakeMcu()
        self.heard: list[tuple[int, bytes]] = []
        self.out = b""

    def advance_to(self, tick: int) -> None:
        """Keep the tick."""
        assert tick >= self.mcu.tick
        self.mcu.tick = tick

    def feed(self, data: bytes) -> None:
        """Hear and answer."""
        self.heard.append((self.mcu.tick, data))
        self.out += b"heard " + data

    def take_output(self) -> bytes:
        """What was said since."""
        out, self.out = self.out, b""
        return out


class FakeLine(Line):
    """A line whose bytes are kept."""

    def __init__(self) -> None:
        super().__init__()
        self.sent = b""

    @property
    def connected(self) -> bool:
        """Somebody is always there."""
        return True

    def send(self, data: bytes) -> None:
        """Keep at most ten bytes."""
        self.sent += data
        self.dropped += max(0, len(self.sent) - 10)
        self.sent = self.sent[:10]


def test_pace_follows_the_clock() -> None:
    """Ticks are seconds times the rate, from the start."""
    pace = Pace(10_000, 5.0)
    assert [pace.tick(5.0), pace.tick(5.0625), pace.tick(5.125), pace.tick(5.125)] == [0, 625, 1250, 1250]


def test_time_stands_still_while_the_process_does() -> None:
    """Five seconds of standstill are a tenth of a second for the bench; the rest is counted."""
    pace = Pace(10_000, 0.0)
    assert pace.tick(5.0) == round(STALL_S * 10_000)
    assert pace.stalled_s == pytest.approx(5.0 - STALL_S)


def test_clock_that_goes_back_moves_nothing() -> None:
    """Ticks never go back."""
    pace = Pace(10_000, 10.0)
    pace.tick(10.0625)
    assert pace.tick(9.0) == 625


def test_bytes_are_fed_at_the_tick_they_came() -> None:
    """The bench is advanced first, and the answer leaves in the same call."""
    now = [0.0]  # seconds
    bench, line = FakeBench(), FakeLine()
    station = Station(bench, line, 10_000, lambda: now[0])
    now[0] = 0.0625
    station.take(b"x\n")
    assert bench.heard == [(625, b"x\n")]
    assert line.sent == b"heard x\n"


def test_dropped_bytes_are_told() -> None:
    """What a host did not take in time goes to the truth."""
    told: list[int] = []
    station = Station(FakeBench(), FakeLine(), 10_000, lambda: 0.0, told.append)
    station.take(b"0123456789")
    assert told == [6]


async def until(holds: Callable[[], bool]) -> None:
    """Let the loop turn until something holds."""
    for _ in range(1_000_000):
        if holds():
            return
        await asyncio.sleep(0)
    raise AssertionError("it never came to hold")


def stations(count: int = 1) -> list[Station]:
    """Stand-ins side by side on kept lines."""
    return [Station(FakeBench(), FakeLine(), 10_000, lambda: 0.0) for _ in range(count)]


def test_control_speaks_to_one_of_several() -> None:
    """A number in front chooses the stand-in."""
    async def talk() -> None:
        made = stations(2)
        control = Control(Path("unused"), made, asyncio.Event())
        assert control.command("2 interlock open\n") == "ok interlock open"
        assert control.command("3 status").startswith("error command: expected a stand-in from 1 to 2")
        assert made[0].bench.plant.inputs() & 1
        assert not made[1].bench.plant.inputs() & 1

    asyncio.run(talk())


def test_quit_over_the_socket_ends_and_cleans_up(tmp_path: Path) -> None:
    """Commands are answered line by line; quit ends the process's loop, the socket is gone, mode was 0600."""
    async def talk() -> None:
        path, done = tmp_path / "c.sock", asyncio.Event()
        running = asyncio.create_task(serve(stations(), done, path))
        await until(path.exists)
        assert path.stat().st_mode & 0o777 == 0o600
        reader, writer = await asyncio.open_unix_connection(str(path))
        writer.write(b"press 0.4\nnonsense\nquit\n")
        assert await reader.readline() == b"ok pressed for 0.4 s\n"
        assert (await reader.readline()).startswith(b"error command: expected one of press,")
        assert await reader.readline() == b"ok quit\n"
        await running
        writer.close()
        assert not path.exists()

    asyncio.run(talk())


def test_endless_line_on_the_socket_is_hung_up(tmp_path: Path) -> None:
    """A client that sends no line end is dropped, the server lives."""
    async def talk() -> None:
        path, done = tmp_path / "c.sock", asyncio.Event()
        running = asyncio.create_task(serve(stations(), done, path))
        await until(path.exists)
        reader, writer = await asyncio.open_unix_connection(str(path))
        writer.write(b"x" * 5000)
        assert await reader.read() == b""
        writer.close()
        assert not running.done()
        done.set()
        await running

    asyncio.run(talk())


def test_stale_socket_is_replaced_and_a_living_one_is_not(tmp_path: Path) -> None:
    """A socket file without a listener is left over; one with a listener belongs to somebody."""
    path = tmp_path / "c.sock"

    async def once(done: asyncio.Event) -> None:
        await serve(stations(), done, path)

    async def already_done() -> None:
        done = asyncio.Event()
        done.set()
        await once(done)

    with socket.socket(socket.AF_UNIX) as other:
        other.bind(str(path))
        other.listen()
        with pytest.raises(CannotConnect):
            asyncio.run(already_done())
    assert path.exists()
    asyncio.run(already_done())
    assert not path.exists()


def test_pseudo_terminal_carries_bytes_both_ways() -> None:
    """A host opens the named device, is heard and answered; after it left another may come."""
    async def talk() -> None:
        line, done = PtyLine(), asyncio.Event()
        station = Station(FakeBench(), line, 10_000)
        running = asyncio.create_task(serve([station], done))
        for _ in range(2):
            fd = os.open(line.name, os.O_RDWR | os.O_NOCTTY)
            os.write(fd, b"hi\n")
            got = await asyncio.get_running_loop().run_in_executor(None, os.read, fd, 100)
            assert got == b"heard hi\n"
            assert line.connected
            os.close(fd)
            await until(lambda: not line.connected)
        done.set()
        await running

    asyncio.run(asyncio.wait_for(talk(), 20))


def test_tcp_port_serves_one_host_at_a_time() -> None:
    """The second caller is turned away, the first is served; when it left the next may call."""
    async def talk() -> None:
        line, done = TcpLine("127.0.0.1", 0), asyncio.Event()
        running = asyncio.create_task(serve([Station(FakeBench(), line, 10_000)], done))
        port = int(line.name.rpartition(":")[2])
        reader, writer = await asyncio.open_connection("127.0.0.1", port)
        writer.write(b"hi\n")
        assert await reader.readline() == b"heard hi\n"
        late, late_writer = await asyncio.open_connection("127.0.0.1", port)
        assert await late.read() == b""
        late_writer.close()
        writer.close()
        await until(lambda: not line.connected)
        reader, writer = await asyncio.open_connection("127.0.0.1", port)
        writer.write(b"ho\n")
        assert await reader.readline() == b"heard ho\n"
        writer.close()
        done.set()
        await running

    asyncio.run(asyncio.wait_for(talk(), 20))
