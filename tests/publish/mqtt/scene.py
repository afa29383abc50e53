"""An outlet with a daemon that only notes what it is asked, beside a broker of its own."""

import asyncio
import contextlib
import itertools
from collections.abc import AsyncIterator, Callable, Coroutine
from dataclasses import replace
from pathlib import Path
from typing import Any

from hvhost.bench.broker import Broker, MqttVersion
from hvhost.bench.file import bench_from
from hvhost.bench.model import Bench
from hvhost.publish.mqtt.outlet import MqttOutlet
from hvhost.publish.outlet import Outlet
from hvhost.publish.snapshot import EventLine, Severity, Snapshot
from hvhost.publish.spans import SpanView
from hvhost.words.errors import CommandRefused
from tests.bench.changes import DEMO
from tests.pictures.states import IDLE

BROKER = Broker(host="127.0.0.1", port=1, version=MqttVersion.V5, root="lab", station="b1", client="lab-b1", tls=False,
                ca="", certificate="", key="", user="", password_file="", password_environment="", telemetry_s=0.1,
                keep_alive_s=1.0, commands=True, queue_folder="", queue_events=10_000)
BASE = "lab/v1/b1/"
SPAN = SpanView(pairs=100, volts=5000.0, volts_min=4990.0, volts_max=5013.0, amps=1e-3, amps_min=0.9e-3,
                amps_max=1.2e-3)


def bench_with(broker: Broker) -> Bench:
    """The demo bench with a broker."""
    return replace(bench_from("demo.bench.yaml", DEMO), broker=broker)


class NotingHost:
    """A daemon's side of an outlet: keeps what was asked and said."""

    def __init__(self) -> None:
        self.asked: list[tuple[str, str]] = []
        self.said: list[str] = []
        self.outlets: list[Outlet] = []
        self.services: list[tuple[str, Callable[[], Coroutine[Any, Any, None]]]] = []
        self.refuse = False

    def ask(self, method: str, params: dict[str, Any], who: str) -> dict[str, Any]:
        """Note it."""
        assert params == {}
        self.asked.append((method, who))
        if self.refuse:
            raise CommandRefused("a link to the MCU", "none", method, "use the emergency switching off")
        return {}

    def add_outlet(self, outlet: Outlet) -> None:
        """Keep it."""
        self.outlets.append(outlet)

    def add_service(self, name: str, service: Callable[[], Coroutine[Any, Any, None]]) -> None:
        """Keep it."""
        self.services.append((name, service))

    def say(self, text: str) -> None:
        """Keep it."""
        self.said.append(text)


class Scene:
    """A station whose snapshots a test offers."""

    def __init__(self, folder: Path, **changes: Any) -> None:
        folder = changes.pop("queue", folder / "queue")
        self.environment: dict[str, str] = changes.pop("environment", {})
        self.broker = replace(BROKER, queue_folder=str(folder), **changes)
        self.host = NotingHost()
        self.outlet = MqttOutlet(bench_with(self.broker), self.host, environment=self.environment, chance=lambda: 0.0)
        self.numbers = itertools.count(1)
        self.lines: list[EventLine] = []
        self.snapshot = IDLE
        self.now_s = 100.0

    def offer(self, *events: str, after_s: float = 0.0, **changes: Any) -> Snapshot:
        """Offer the next snapshot with more events, some time later."""
        self.now_s += after_s
        for words in events:
            number = next(self.numbers)
            self.lines.append(EventLine(utc_ns=1_764_594_202_000_000_000 + number, text=words, number=number,
                                        severity=Severity.NOTE))
        changes = {"span": SPAN, **changes}
        self.snapshot = replace(self.snapshot, events=tuple(self.lines[-50:]), now_s=self.now_s,
                                seq=self.snapshot.seq + 1, **changes)
        self.outlet.offer_nowait(self.snapshot)
        return self.snapshot

    @contextlib.asynccontextmanager
    async def serving(self) -> AsyncIterator["Scene"]:
        """Run the outlet's task as the daemon does."""
        task = asyncio.create_task(self.outlet.serve())
        try:
            yield self
        finally:
            task.cancel()
            with contextlib.suppress(asyncio.CancelledError):
                await task

    async def until(self, condition: Callable[[], Any], timeout_s: float = 15.0) -> None:
        """Wait for a condition of the outlet."""
        async with asyncio.timeout(timeout_s):
            while not condition():
                await asyncio.sleep(0.005)
