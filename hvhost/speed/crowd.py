"""The protective path beside a crowd: fifty instrument clients that ask and fifty local subscribers, at 10 Hz each.

The same trip as in B2 is timed from the bytes of the offending sample to the cut on the wire, in turn with the crowd at
work and with the crowd at rest (connected, silent).  Sockets, servers and pictures are those of the daemon and live on
the loop that reads the port; the crowd is a process of its own.  ``python -m hvhost.speed.crowd`` prints the table.
"""

import asyncio
import os
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Coroutine
from dataclasses import replace
from pathlib import Path
from typing import Any

from hvhost.bench.instrument import Instrument
from hvhost.ports.descriptor import DescriptorPort
from hvhost.publish.instrument.server import InstrumentServer
from hvhost.publish.local import LocalLimits, LocalServer
from hvhost.publish.outlet import Outlet
from hvhost.speed.figures import Line, Sides
from hvhost.speed.setting import Setting
from hvhost.speed.trip import _Trips

CLIENTS, RATE_HZ = 50, 10.0
PICTURE_S = 0.1
BOUND = 1.2
SETTLE_S = 0.2


def measure(setting: Setting) -> list[Line]:
    """Return the lines: the ratio of medians, and how many questions were answered a second."""
    trips = _Trips(setting)
    try:
        sides, answers_hz, told_hz = asyncio.run(_Crowded(setting, trips).take())
    finally:
        trips.close()
    raw = sides.raw()
    return [Line(budget="B2", what=f"the same beside {CLIENTS} instrument clients and {CLIENTS} watchers at 10 Hz",
                 measured=sides.ratio, unit="x", bound=BOUND, against="the same with all of them silent",
                 note=f"{raw['ours']['median']:.0f} µs against {raw['other']['median']:.0f} µs; p99 "
                      f"{raw['ours']['p99']:.0f} µs against {raw['other']['p99']:.0f} µs; {answers_hz:.0f} answers and "
                      f"{told_hz:.0f} notifications a second", raw=raw)]


class _Crowded:
    """The servers of the station under test on the loop of the measurement, and the crowd."""

    def __init__(self, setting: Setting, trips: _Trips) -> None:
        self.setting, self.trips = setting, trips
        self.station = trips.player.station
        self.instrument = InstrumentServer(self.station.core.bench, Instrument(host="127.0.0.1", port=0), self)
        self.local = LocalServer(str(setting.place() / "c.sock"),
                                 lambda method, params, peer: self.station.handle(method, params, peer.text),
                                 limits=LocalLimits(clients=CLIENTS))
        self.listening = asyncio.Event()

    # ------------------------------------------------------------ the host of the instrument socket

    def ask(self, method: str, params: dict[str, Any], who: str) -> dict[str, Any]:
        """One request to the station."""
        return self.station.handle(method, params, who)

    def add_outlet(self, outlet: Outlet) -> None:
        """Not used: both outlets are known here."""

    def add_service(self, name: str, service: Callable[[], Coroutine[Any, Any, None]]) -> None:
        """Not used: the one service is known here."""

    def say(self, text: str) -> None:
        """The socket listens."""
        self.listening.set()

    # ------------------------------------------------------------ measuring

    async def take(self) -> tuple[Sides, float, float]:
        """Trips with and without the crowd, in turn by blocks; answers and notifications a second."""
        tasks = [asyncio.create_task(self.instrument.serve()), asyncio.create_task(self._pictures())]
        await self.local.open()
        await self.listening.wait()
        child = await asyncio.create_subprocess_exec(
            sys.executable, "-m", "hvhost.speed.crowders", str(self.instrument.port), self.local.path, str(CLIENTS),
            f"{RATE_HZ:g}", stdin=subprocess.PIPE, stdout=subprocess.PIPE)
        try:
            return await self._blocks(child)
        finally:
            assert child.stdin is not None
            child.stdin.close()
            await child.wait()
            for task in tasks:
                task.cancel()
            await asyncio.gather(*tasks, return_exceptions=True)
            await self.local.close()

    async def _blocks(self, child: asyncio.subprocess.Process) -> tuple[Sides, float, float]:
        assert child.stdin is not None
        assert child.stdout is not None
        await child.stdout.readline()
        port = DescriptorPort(os.dup(self.trips.device.fd), "speed", lambda: None)
        self.trips.player.write = port.write_nowait
        port.attach(self.station.feed, lambda: None, lambda reason: None)
        ours: list[tuple[float, ...]] = []
        other: list[tuple[float, ...]] = []
        counts, busy_s = [0, 0], 0.0
        for k in range(2 * self.setting.blocks):
            crowded = k % 4 in (0, 3)
            if crowded:
                child.stdin.write(b"go\n")
                await child.stdout.readline()
            await asyncio.sleep(SETTLE_S)  # both sides begin with the loop as they leave it
            begun_s = time.monotonic()
            block = tuple([await self.trips._one() for _ in range(self.setting.per_block)])
            (ours if crowded else other).append(block)
            if crowded:
                busy_s += time.monotonic() - begun_s + SETTLE_S
                child.stdin.write(b"rest\n")
                came = (await child.stdout.readline()).split()
                counts = [counts[0] + int(came[0]), counts[1] + int(came[1])]
            self.setting.say(f"crowd, block {k // 2 + 1} of {self.setting.blocks}")
        port.close()
        os.close(port.fd)
        return Sides(ours=tuple(ours), other=tuple(other)), counts[0] / busy_s, counts[1] / busy_s

    async def _pictures(self) -> None:
        """As the daemon does; the station's clock stands still here, and a picture must be younger than a question."""
        loop = asyncio.get_running_loop()
        while True:
            shot = replace(self.station.snapshot(), now_s=loop.time())
            self.local.offer_nowait(shot)
            self.instrument.offer_nowait(shot)
            await asyncio.sleep(PICTURE_S)


def main() -> int:
    """Measure and print; 0 where the bound holds."""
    from hvhost.cli.demo import examples
    from hvhost.speed.table import table

    with tempfile.TemporaryDirectory(prefix="hvhost-speed-") as folder:
        lines = measure(Setting(bench=examples() / "demo.bench.yaml", folder=Path(folder), minutes=0.0))
    print(table(lines))
    return 0 if all(line.within for line in lines) else 1


if __name__ == "__main__":
    sys.exit(main())
