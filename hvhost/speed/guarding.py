"""B7: the guard with every rule on a block of 32, beside one numpy operation on as many numbers."""

import time
from collections.abc import Iterator

import numpy as np

from hvhost.record.recorder import InlineRecorder
from hvhost.samples.blocks import SampleBlock
from hvhost.speed.figures import Line, Sides, interleaved
from hvhost.speed.setting import Setting
from hvhost.wire.frames import Block, decode_block
from hvhost.wire.lines import unseal


def measure(setting: Setting) -> list[Line]:
    """Return the line of B7: the dearer of ramp and hold."""
    scene = setting.scene
    parts = {"ramp": _sides(setting, scene.ramp, scene.blocks(scene.ramp, scene.hold)),
             "hold": _sides(setting, scene.hold, _further(setting))}
    worse = max(parts, key=lambda name: parts[name].ratio)
    raws = {name: side.raw() for name, side in parts.items()}
    return [Line(
        budget="B7", what="guard, every rule, a block of 32 pairs", measured=parts[worse].ratio, unit="x", bound=60.0,
        aim=25.0, against="one np.subtract(out=) of 32 numbers",
        note=", ".join(f"{name} {raw['ours']['median']:.1f} µs against {raw['other']['median']:.2f} µs"
                       for name, raw in raws.items()), raw=raws)]


def _further(setting: Setting) -> Iterator[Block]:
    scene = setting.scene
    for given in scene.further(setting.blocks * setting.per_block):
        body = unseal((given.data or b"")[:-1])
        assert isinstance(body, bytes)
        yield decode_block(body, scene.signs)


def _sides(setting: Setting, entry: int, blocks: "Iterator[Block] | list[Block]") -> Sides:
    player = setting.scene.player(entry, setting.place(), InlineRecorder.open)
    assembler, guard = player.station.core.assembler, player.station.core.guard
    assert assembler is not None
    assert guard is not None
    now_s = player.clock.now_s()
    taken = (sample for k, block in enumerate(blocks)
             if (sample := assembler.take(block, now_s + k * 0.032)) is not None)
    judge, clock = guard.judge, time.perf_counter
    a, b, out = np.arange(32, dtype=np.int64), np.ones(32, dtype=np.int64), np.empty(32, dtype=np.int64)
    subtract = np.subtract

    def ours() -> list[float]:
        seconds = []
        part: list[SampleBlock] = [sample for _, sample in zip(range(setting.per_block), taken, strict=False)]
        for sample in part:
            begun = clock()
            judge(sample)
            seconds.append(clock() - begun)
        return seconds

    def other() -> list[float]:
        seconds = []
        for _ in range(setting.per_block):
            begun = clock()
            subtract(a, b, out=out)
            seconds.append(clock() - begun)
        return seconds

    sides = interleaved(ours, other, blocks=setting.blocks)
    player.close()
    return sides
