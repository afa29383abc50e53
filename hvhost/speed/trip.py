"""B2: from the bytes of an offending sample to the cut on the wire, beside a bare echo of the same line.

Both sides run on one event loop through the port that the daemon uses; the far end is a process of its own, on another
core where there is one, and times what it asks: from its write to the first byte that comes back.  Before every trip
the core is put back to where it held the voltage, so each one is the first; the same is done before every echo, so
that both find the processor's caches in the same state.  The record is written between the trips and not by a thread
of its own: two thousand trips in seconds would keep that thread busier than any run does.
"""

import asyncio
import copy
import os
from collections.abc import Callable, Mapping
from typing import Any

from hvhost.ports.descriptor import DescriptorPort
from hvhost.record.folder import RunFolder
from hvhost.record.recorder import DiskFile, Recorder
from hvhost.speed.child import Device, as_a_daemon, set_fifo
from hvhost.speed.figures import Line, Sides, flat, p99_interval, quantile
from hvhost.speed.scene import Player
from hvhost.speed.setting import Setting
from hvhost.supervisor.core import Core
from hvhost.supervisor.journal import NoJournal
from hvhost.wire.frames import Block, decode_block, encode_block
from hvhost.wire.lines import seal, unseal

HOST_FIFO, DEVICE_FIFO = 40, 50
OVERCURRENT = 30_000  # code: far above every limit, and no collapse of the voltage with it


def measure(setting: Setting) -> list[Line]:
    """Return the lines of B2: at ordinary priority, and in real time where that is permitted."""
    bench = _Trips(setting)
    try:
        with as_a_daemon(bench.device):
            return _both(setting, bench)
    finally:
        bench.close()


def _both(setting: Setting, bench: "_Trips") -> list[Line]:
    sides = asyncio.run(bench.take(setting, "ordinary priority"))
    lines = [_median(sides, 3.5, "median")]
    if bench.device.fifo(DEVICE_FIFO) and set_fifo(HOST_FIFO):
        try:
            sides = asyncio.run(bench.take(setting, "SCHED_FIFO"))
        finally:
            set_fifo(0)
        lines += [_median(sides, 2.5, "median, real-time"), _tail(sides)]
    else:
        setting.say("SCHED_FIFO is not permitted here: its two bounds are not judged")
    return lines


def _median(sides: Sides, bound: float, what: str) -> Line:
    raw = sides.raw()
    return Line(budget="B2", what=f"offending sample to cut on the wire, {what}", measured=sides.ratio, unit="x",
                bound=bound, aim=1.8, against="a bare echo of the same line",
                note=f"{raw['ours']['median']:.0f} µs against {raw['other']['median']:.0f} µs; p99 "
                     f"{raw['ours']['p99']:.0f} µs [{raw['ours']['p99_low']:.0f}, {raw['ours']['p99_high']:.0f}]",
                raw=raw)


def _tail(sides: Sides) -> Line:
    ours, other = quantile(flat(sides.ours), 0.99), quantile(flat(sides.other), 0.99)
    low, high = p99_interval(sides.ours)
    return Line(budget="B2", what="offending sample to cut on the wire, p99, real-time", measured=ours / other,
                unit="x", bound=3.0, against="the p99 of a bare echo",
                note=f"{ours * 1e6:.0f} µs [{low * 1e6:.0f}, {high * 1e6:.0f}] against {other * 1e6:.0f} µs",
                raw=sides.raw())


class _Trips:
    """The station at hold, the offending line, the device, and what is called when bytes arrive."""

    def __init__(self, setting: Setting) -> None:
        scene = setting.scene
        own = scene.blocks(scene.hold)
        self.recorder: Recorder | None = None
        self.player: Player = scene.player(scene.hold + 40, setting.place(), self._open)
        self.journal, self.kept = self._keep()
        self.line = seal(encode_block(_offending(own, self.kept), scene.signs))
        body = unseal(self.line[:-1])
        assert isinstance(body, bytes)
        decode_block(body, scene.signs)
        self.device = Device(setting.place())

    def _open(self, folder: RunFolder, meta: Mapping[str, Any], *, tag: int, signs: str,
              on_failed: Callable[[str], None]) -> Recorder:
        self.recorder = Recorder(DiskFile(folder.blocks), mark=tag, signs=signs, on_failed=on_failed)
        self.recorder.begin(meta)
        return self.recorder

    def close(self) -> None:
        self.player.close()
        self.device.__exit__()

    def _keep(self) -> tuple[Any, Core]:
        """Return the journal, and the core as it is now, without it."""
        core = self.player.station.core
        journal, core.journal = core.journal, NoJournal()
        return journal, core

    def again(self) -> None:
        """Put the station back to where it held."""
        kept, station = self.kept, self.player.station
        if self.recorder is not None:
            self.recorder.step(0.0)
        shared: list[Any] = [kept.bench, kept._sessions, kept.run.spec if kept.run else None]
        core = copy.deepcopy(kept, {id(one): one for one in shared if one is not None})
        core.journal = self.journal
        station.core = station.composer.core = core

    async def take(self, setting: Setting, name: str) -> Sides:
        """Return seconds of trips and echoes, in turn by blocks."""
        port = DescriptorPort(os.dup(self.device.fd), "speed", lambda: None)
        station = self.player.station
        self.player.write = port.write_nowait
        act: list[Callable[[bytes], object]] = [port.write_nowait]

        def arrived(data: bytes) -> None:
            act[0](data)

        port.attach(arrived, lambda: None, lambda reason: None)
        ours: list[tuple[float, ...]] = []
        other: list[tuple[float, ...]] = []
        for k in range(2 * setting.blocks):
            trips = k % 4 in (0, 3)
            act[0] = station.feed if trips else port.write_nowait
            (ours if trips else other).append(
                tuple([await self._one() for _ in range(setting.per_block)]))
            setting.say(f"{name}, block {k // 2 + 1} of {setting.blocks}")
        port.close()
        os.close(port.fd)
        return Sides(ours=tuple(ours), other=tuple(other))

    async def _one(self) -> float:
        self.again()
        loop, done = asyncio.get_running_loop(), asyncio.Event()
        loop.add_reader(self.device.answers, done.set)
        self.device.ask(self.line)
        await done.wait()
        loop.remove_reader(self.device.answers)
        return int(self.device.answer()) * 1e-9


def _offending(own: list[Block], core: Core) -> Block:
    """The block that would come next, its last two samples far above the overcurrent limit."""
    last = core.sample
    assert last is not None
    codes = list(own[0].codes)
    codes[-1] = codes[-3] = OVERCURRENT
    pairs = len(codes) // 2
    return Block(last.raw.index + last.pairs, last.raw.tick + last.pairs * last.sample_ticks, last.v_word, last.i_word,
                 last.state, 0, last.inputs, last.missed, last.event, last.arc, tuple(codes[: 2 * pairs]))
