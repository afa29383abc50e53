"""The bench for asyncio: the same acts, side by side."""

import asyncio
from collections.abc import Awaitable, Callable
from dataclasses import replace
from pathlib import Path

import pytest

from hvhost.client import AsyncBench, CannotConnect, CommandRefused, connect_async
from hvhost.publish.snapshot import StopState
from hvhost.publish.tickets import read_ticket, write_ticket
from tests.client import test_bench
from tests.client.test_bench import methods
from tests.pictures.states import RUNNING
from tests.publish.serving import FakeBench
from tests.publish.test_readings import block

fake = test_bench.fake


def use(fake: FakeBench, body: Callable[[AsyncBench], Awaitable[None]]) -> None:
    """Run the body with a bench."""
    async def run() -> None:
        async with connect_async(fake.path, who="script") as bench:
            await body(bench)

    asyncio.run(run())


def test_control_set_points_and_runs_are_as_in_the_plain_bench(fake: FakeBench, tmp_path: Path) -> None:
    """The same requests in the same order, the ticket gone in the end."""
    (tmp_path / "p.yaml").write_text("plan: x\n")

    async def body(bench: AsyncBench) -> None:
        await bench.set(volts=5e3, amps=1e-3, slew=500)
        assert (await bench.run(tmp_path / "p.yaml", specimen="S-1")).run == "270115n1"
        assert (await bench.direct("S-1")).specimen == "S-1"
        await bench.acknowledge()
        assert await bench.cancel() == "270115n1"
        assert read_ticket(fake.path) == "t1"
        await bench.release_control()
        await bench.take_control("again")
        assert await bench.runs() == ()

    use(fake, body)
    assert read_ticket(fake.path) == ""
    assert methods(fake) == ["seat.take", "set", "run", "direct", "seat.acknowledge", "cancel", "seat.release",
                             "seat.take", "status"]


def test_shared_control_is_left(fake: FakeBench) -> None:
    """What the terminal holds stays the terminal's; a ticket that is over is not used."""
    write_ticket(fake.path, "of the terminal")
    use(fake, lambda bench: bench.set(volts=1.0, amps=1e-3))
    assert methods(fake) == ["seat.check", "set"]
    fake.answers["seat.check"] = CommandRefused("control of the bench", "nobody has it")
    use(fake, lambda bench: bench.set(volts=1.0, amps=1e-3))
    assert methods(fake)[2:] == ["seat.check", "seat.take", "set"]


def test_many_tasks_share_a_connection_and_each_gets_its_own_answer(fake: FakeBench) -> None:
    """Errors come to whoever asked."""
    async def body(bench: AsyncBench) -> None:
        fake.publish(RUNNING)
        await bench.take_control()
        fake.answers["set"] = CommandRefused("an energised direct run", "idle")
        results = await asyncio.gather(bench.status(), bench.set(volts=1.0, amps=1e-3), bench.status(),
                                       return_exceptions=True)
        assert [type(one).__name__ for one in results] == ["Snapshot", "CommandRefused", "Snapshot"]

    use(fake, body)


def test_stops_have_their_own_connection_and_a_cut_is_confirmed_or_not(fake: FakeBench) -> None:
    """As in the plain bench (S7)."""
    stop = [StopState.CUT_CONFIRMED]

    def confirm(method: str) -> None:
        if method == "cut" and fake.loop is not None and fake.server is not None:
            fake.loop.call_later(0.05, fake.server.offer_nowait, replace(RUNNING, seq=11, stop=stop[0]))

    fake.on_call = confirm

    async def body(bench: AsyncBench) -> None:
        fake.publish(replace(RUNNING, seq=10))
        await bench.lower()
        await bench.cut()
        fake.publish(replace(RUNNING, seq=10))
        stop[0] = StopState.CUT_NOT_CONFIRMED
        with pytest.raises(CannotConnect, match="emergency switching off"):
            await bench.cut()

    use(fake, body)


def test_readings_come_beside_other_calls(fake: FakeBench, monkeypatch: pytest.MonkeyPatch) -> None:
    """Blocks until so many seconds; where none come, a sentence."""
    async def body(bench: AsyncBench) -> None:
        async def publish() -> None:
            for n in range(1000):
                assert fake.server is not None
                assert fake.server.readings is not None
                fake.server.readings.take(block(32 * n, [n] * 32))
                await asyncio.to_thread(fake.publish, replace(RUNNING, seq=n))
                await asyncio.sleep(0.01)

        task = asyncio.create_task(publish())
        await asyncio.sleep(0.05)
        blocks = []
        async for one in bench.readings(every=16, seconds=0.2):
            blocks.append(one)
            await bench.status()
        assert sum(map(len, blocks)) >= 12
        assert (await bench.wait_energised(5.0)).bench == RUNNING.bench
        task.cancel()
        monkeypatch.setattr("hvhost.client.readings.STILL_S", 0.05)
        with pytest.raises(CannotConnect, match="none for"):
            await anext(aiter(bench.readings()))

    use(fake, body)


def test_a_daemon_that_goes_is_a_sentence(fake: FakeBench, tmp_path: Path) -> None:
    """Nobody there, gone in between, or no connection at all."""
    async def nobody() -> None:
        with pytest.raises(CannotConnect, match="hvhost serve BENCH"):
            async with connect_async(str(tmp_path / "x.sock")):
                pass
        with pytest.raises(CannotConnect, match="async with"):
            await connect_async(fake.path).status()

    asyncio.run(nobody())

    async def gone(bench: AsyncBench) -> None:
        assert fake.server is not None
        assert fake.loop is not None
        await asyncio.wrap_future(asyncio.run_coroutine_threadsafe(fake.server.close(), fake.loop))
        with pytest.raises(CannotConnect, match="a connected daemon"):
            await bench.status()

    use(fake, gone)
