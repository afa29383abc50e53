"""A broker killed, restarted, frozen and cut off, and a daemon restarted, at random moments: every event arrives.

``python -m tests.publish.mqtt.storm [MOMENTS] [--seed N]`` (100 moments unless told).  The judge is a subscriber of
the tests' own: repeats dropped by id, the events must come as they happened, each of them.

The outlet reaches the broker through a relay that lets it in only while the subscription stands: what a broker has
acknowledged while nobody subscribed is the broker's affair, and no part of what the outlet promises.
"""

import argparse
import asyncio
import contextlib
import random
import signal
import sys
import tempfile
import time
from pathlib import Path

from tests.publish.mqtt.mosquitto import Mosquitto
from tests.publish.mqtt.scene import BASE, Scene
from tests.publish.mqtt.wireclient import Got, WireClient

MOMENTS = ("kill", "restart", "freeze", "cut off", "black hole", "new daemon")
CALM_S = 90.0  # liveness: after the storm everything is to be there within this time


class Relay:
    """Between outlet and broker: passes bytes on, holds them, or cuts."""

    def __init__(self, port: int) -> None:
        self.port_behind = port
        self.admitting = False
        self.flowing = asyncio.Event()
        self.flowing.set()
        self._writers: set[asyncio.StreamWriter] = set()
        self._tasks: set[asyncio.Task[None]] = set()
        self.port = 0

    async def open(self) -> None:
        """Listen on a free port."""
        self._server = await asyncio.start_server(self._come, "127.0.0.1", 0)
        self.port = self._server.sockets[0].getsockname()[1]

    async def _come(self, reader: asyncio.StreamReader, writer: asyncio.StreamWriter) -> None:
        self._writers.add(writer)
        try:
            if self.admitting:
                there, back = await asyncio.open_connection("127.0.0.1", self.port_behind)
                self._writers.add(back)
                self._tasks |= {asyncio.ensure_future(self._pass(reader, back)),
                                asyncio.ensure_future(self._pass(there, writer))}
                return
        except OSError:
            pass
        self._close(writer)

    async def _pass(self, reader: asyncio.StreamReader, writer: asyncio.StreamWriter) -> None:
        with contextlib.suppress(OSError):
            while data := await reader.read(65_536):
                await self.flowing.wait()
                writer.write(data)
                await writer.drain()
        self._close(writer)

    def _close(self, writer: asyncio.StreamWriter) -> None:
        self._writers.discard(writer)
        writer.close()

    def cut(self) -> None:
        """End every connection at once, without a goodbye."""
        for writer in list(self._writers):
            writer.transport.abort()
        self._writers.clear()

    async def close(self) -> None:
        """End it all."""
        self._server.close()
        self.cut()
        for task in self._tasks:
            task.cancel()
        await asyncio.gather(*self._tasks, return_exceptions=True)


class Storm:
    """One seed decides which moments come, and when."""

    def __init__(self, folder: Path, seed: int) -> None:
        self.random = random.Random(seed)
        self.folder = folder
        self.broker = Mosquitto(folder)
        self.relay = Relay(self.broker.port)
        self.got: list[Got] = []
        self.offered = 0
        self.scene: Scene
        self._serving: asyncio.Task[None] | None = None
        self._ended = False
        self._happening = asyncio.Event()
        self.moments: list[tuple[int, str]] = []  # which blow came when so many events had happened
        self.longest_stall_s = 0.0

    # ------------------------------------------------------------ the judge

    async def subscribe_for_ever(self) -> None:
        """Stay subscribed; the relay lets the outlet in only meanwhile."""
        while not self._ended:
            try:
                client = await WireClient.connect(self.broker.port)
                client.got = self.got
                await client.subscribe(BASE + "event")
            except (OSError, TimeoutError, AssertionError):
                await asyncio.sleep(0.02)
                continue
            self.relay.admitting = True
            await client.ended.wait()
            self.relay.admitting = False
            await client.close(goodbye=False)

    def verdict(self) -> list[str]:
        """What is wrong: nothing where every event came, in order."""
        seen: list[str] = []
        ids: set[str] = set()
        for message in self.got:
            data = message.data
            if data["id"] not in ids:
                ids.add(data["id"])
                seen.append(data["text"])
        wanted = [f"event {n}" for n in range(1, self.offered + 1)]
        alarms = [words for words in seen if not words.startswith("event")]
        happened = [words for words in seen if words.startswith("event")]
        wrong = []
        if happened != wanted:
            lacking = sorted(set(wanted) - set(happened), key=lambda words: int(words.split()[1]))
            first = next((n for n, (a, b) in enumerate(zip(happened, wanted, strict=False)) if a != b), len(happened))
            wrong = [f"{len(happened)} of {len(wanted)} came; lacking {lacking[:9]}; parts at event {first + 1}; blows "
                     f"{[one for one in self.moments if abs(one[0] - first) < 200]}"]
        return wrong + [words for words in alarms if not words.startswith("MQTT:")]

    def complete(self) -> bool:
        """Whether the last event has come."""
        return any(message.data["text"] == f"event {self.offered}" for message in self.got[-50:])

    # ------------------------------------------------------------ the accused

    def begin_daemon(self) -> None:
        """A daemon with the queue that the one before left; its numbers of snapshot lines begin anew."""
        self.scene = Scene(self.folder, port=self.relay.port)
        self._serving = asyncio.create_task(self.scene.outlet.serve())
        self._happening.set()

    async def end_daemon(self) -> None:
        """The daemon ends in good order."""
        assert self._serving is not None
        self._happening.clear()  # nothing happens on a bench whose daemon has ended
        self._serving.cancel()
        with contextlib.suppress(asyncio.CancelledError):
            await self._serving

    async def work_for_ever(self) -> None:
        """Something happens all the time; how late this task is told from the loop's stalls."""
        while True:
            before_s = time.monotonic()
            await asyncio.sleep(0.01)
            self.longest_stall_s = max(self.longest_stall_s, time.monotonic() - before_s - 0.01)
            await self._happening.wait()
            self.offered += 1
            self.scene.offer(f"event {self.offered}", after_s=0.01)

    # ------------------------------------------------------------ the weather

    async def moment(self, kind: str) -> None:
        """One blow, some time, and what ends it."""
        await asyncio.sleep(self.random.uniform(0.0, 0.4))
        last_s = self.random.uniform(0.0, 0.4)
        self.moments.append((self.offered, kind))
        if kind == "kill":
            self.broker.kill()
            await asyncio.sleep(last_s)
            await asyncio.to_thread(self.broker.start)
        elif kind == "restart":
            self.broker.signal(signal.SIGTERM)
            assert self.broker.process is not None
            await asyncio.to_thread(self.broker.process.wait)
            await asyncio.sleep(last_s)
            await asyncio.to_thread(self.broker.start)
        elif kind == "freeze":
            self.broker.signal(signal.SIGSTOP)
            await asyncio.sleep(last_s if self.random.random() < 0.7 else 2.5)
            self.broker.signal(signal.SIGCONT)
        elif kind == "cut off":  # what is under way either way is lost with the line
            self.relay.flowing.clear()
            await asyncio.sleep(last_s / 2)
            self.relay.cut()
            self.relay.flowing.set()
        elif kind == "black hole":
            self.relay.flowing.clear()
            await asyncio.sleep(last_s if self.random.random() < 0.7 else 2.5)
            self.relay.flowing.set()
        else:
            await self.end_daemon()
            self.begin_daemon()

    async def run(self, moments: int) -> list[str]:
        """Storm, then calm; return what is wrong."""
        self.broker.start()
        await self.relay.open()
        subscriber = asyncio.create_task(self.subscribe_for_ever())
        self.begin_daemon()
        working = asyncio.create_task(self.work_for_ever())
        try:
            for n in range(moments):
                await self.moment(MOMENTS[n] if n < len(MOMENTS) else self.random.choice(MOMENTS))
            await asyncio.sleep(0.05)
            working.cancel()
            await asyncio.gather(working, return_exceptions=True)
            with contextlib.suppress(TimeoutError):
                async with asyncio.timeout(CALM_S):
                    while not self.complete():
                        await asyncio.sleep(0.01)
        finally:
            self._ended = True
            working.cancel()
            await self.end_daemon()
            self.broker.kill()
            await subscriber
            await self.relay.close()
        return self.verdict()


def main() -> int:
    """Run one storm and tell."""
    parser = argparse.ArgumentParser(prog="python -m tests.publish.mqtt.storm", description=__doc__)
    parser.add_argument("moments", nargs="?", type=int, default=100)
    parser.add_argument("--seed", type=int, default=int(time.time()))
    args = parser.parse_args()
    print(f"seed {args.seed}, {args.moments} moments", flush=True)
    began_s = time.monotonic()
    with tempfile.TemporaryDirectory() as folder:
        storm = Storm(Path(folder), args.seed)
        wrong = asyncio.run(storm.run(args.moments))
    repeats = len(storm.got) - len({message.data["id"] for message in storm.got})
    print(f"{storm.offered} events, {len(storm.got)} messages, {repeats} repeats, "
          f"latest turn of the loop {storm.longest_stall_s * 1e3:.0f} ms, {time.monotonic() - began_s:.0f} s")
    print("\n".join(wrong) or "every event arrived, in order")
    return 1 if wrong else 0


if __name__ == "__main__":
    sys.exit(main())
