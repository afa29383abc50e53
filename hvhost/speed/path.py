"""B1: from bytes to record, beside the obvious script; and through a pseudo-terminal, beside a raw read.

Both sides are handed ``PIECE`` bytes at a time, as they come from a port at 1 MB/s.  At a thousand pairs a second each
block is a read of its own, which costs the host more and the script nothing here: that figure is shown beside it.
"""

import os
import time
from bisect import bisect_right
from itertools import accumulate
from statistics import median

from hvhost.ports.descriptor import READ_MAX
from hvhost.record.recorder import Recorder
from hvhost.speed.child import Device, as_a_daemon
from hvhost.speed.figures import Line, Sides, interleaved
from hvhost.speed.obvious import obvious, spoken
from hvhost.speed.scene import Given, Player
from hvhost.speed.setting import Setting

PIECE = 1000  # bytes
POLL_S = 0.06  # longer than the recorder waits: one look finds it done, and waiting costs next to nothing itself
POUR_BLOCKS = 500  # sample blocks poured through the pseudo-terminal at a time: about 120 kB


def measure(setting: Setting) -> list[Line]:
    """Return the lines of B1."""
    return [_processor(setting, pieces=True), _processor(setting, pieces=False), _throughput(setting)]


def _processor(setting: Setting, *, pieces: bool) -> Line:
    """The dearer of ramp and hold; ``pieces`` hands over pieces of the stream, else a block at a time."""
    scene = setting.scene
    parts: dict[str, Sides] = {}
    for name, entry in (("ramp", scene.ramp), ("hold", scene.hold)):
        player = scene.player(entry, setting.place(), Recorder.open)
        entries = (_bytes_only(scene.given[scene.ramp : scene.hold]) if name == "ramp"
                   else list(scene.further(setting.blocks * setting.per_block)))
        with as_a_daemon():
            parts[name] = _against_obvious(setting, player, entries, name, pieces=pieces)
        player.close()
    worse = max(parts, key=lambda name: parts[name].ratio)
    return Line(
        budget="B1", measured=parts[worse].ratio, unit="x", bound=0.5, aim=0.2, judged=pieces,
        what="processor per pair, bytes to record, every rule" if pieces else "the same, a read for each block",
        against=f"the obvious script (split, float, csv), {PIECE} bytes at a time",
        note=", ".join(f"{name} {median(s[0] for s in side.ours) * 1e6:.2f} µs against "
                       f"{median(s[0] for s in side.other) * 1e6:.2f} µs" for name, side in parts.items()),
        raw={name: {"ratio": side.ratio, "ours_us_per_pair": [s[0] * 1e6 for s in side.ours],
                    "obvious_us_per_pair": [s[0] * 1e6 for s in side.other]} for name, side in parts.items()})


def _bytes_only(entries: tuple[Given, ...]) -> list[Given]:
    return [given for given in entries if given.request is None]


def _in_pieces(entries: list[Given]) -> list[Given]:
    """The same bytes cut into pieces, each handed over when the line that it ends in is."""
    out: list[Given] = []
    rest = b""
    for given in entries:
        if given.data is None:
            continue
        rest += given.data
        while len(rest) >= PIECE:
            out.append(Given(given.at_ns, rest[:PIECE]))
            rest = rest[PIECE:]
    if rest:
        out.append(Given(entries[-1].at_ns, rest))
    return out


def _against_obvious(setting: Setting, player: Player, entries: list[Given], name: str, *, pieces: bool) -> Sides:
    """Processor seconds per pair, all threads of this process; a side's block ends when its record is written."""
    scene, each = setting.scene, setting.per_block
    recording = player.station.recording
    assert recording is not None
    port, out = setting.folder / "port.txt", setting.folder / "obvious.csv"
    port.write_bytes(spoken(scene.blocks(scene.hold)[:each], 1e-3))
    at = 0

    def ours() -> list[float]:
        nonlocal at
        part = entries[at : at + each]
        at += each
        blocks = sum(given.data is not None for given in part)
        if pieces:
            part = _in_pieces(part)
        begun = time.process_time()
        player.go(part)
        while recording.health().queued:
            time.sleep(POLL_S)
        return [(time.process_time() - begun) / (32 * blocks)]

    def other() -> list[float]:
        begun = time.process_time()
        with port.open("rb", buffering=PIECE) as lines, out.open("w", newline="") as rows:
            pairs = obvious(lines, rows)
        return [(time.process_time() - begun) / pairs]

    return interleaved(ours, other, blocks=setting.blocks, say=lambda text: setting.say(f"{name}, {text}"))


def _throughput(setting: Setting) -> Line:
    scene = setting.scene
    lines = list(scene.further(setting.blocks * POUR_BLOCKS))
    data = b"".join(given.data or b"" for given in lines)
    ends = list(accumulate(len(given.data or b"") for given in lines))
    player = scene.player(scene.hold, setting.place(), Recorder.open)
    at = 0  # block up to which the station was fed

    with Device(setting.place(), data) as device, as_a_daemon(device):

        def ours() -> list[float]:
            nonlocal at
            begin = ends[at - 1] if at else 0
            at += POUR_BLOCKS
            return [_pour(device, begin, ends[at - 1], station=True)]

        def other() -> list[float]:
            return [_pour(device, 0, ends[POUR_BLOCKS - 1], station=False)]

        def _pour(device: Device, begin: int, end: int, *, station: bool) -> float:
            """Seconds per byte of reading what the device writes."""
            seen, fd = begin, device.fd
            begun = time.perf_counter()
            device.pour(begin, end)
            while seen < end:
                chunk = os.read(fd, READ_MAX)
                seen += len(chunk)
                if station:
                    player.clock.elapsed_ns = lines[min(bisect_right(ends, seen), len(lines) - 1)].at_ns
                    player.station.feed(chunk)
            seconds = time.perf_counter() - begun
            device.await_done()
            return seconds / (end - begin)

        sides = interleaved(ours, other, blocks=setting.blocks, say=lambda text: setting.say(f"pty, {text}"))
    player.close()
    return Line(
        budget="B1", what="throughput through a pseudo-terminal", measured=100.0 / sides.ratio, unit="%", bound=8.0,
        aim=15.0, worst="least", against="a raw read of the same bytes",
        note=f"{1e-6 / median(s[0] for s in sides.ours):.1f} MB/s against "
             f"{1e-6 / median(s[0] for s in sides.other):.0f} MB/s",
        raw={"ours_mb_per_s": [1e-6 / s[0] for s in sides.ours], "raw_mb_per_s": [1e-6 / s[0] for s in sides.other]})
