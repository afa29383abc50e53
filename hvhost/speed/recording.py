"""B8: appending, beside a plain write of the same bytes; what a power cut may take; what one flipped bit takes.

The bytes per pair at rest are told by the rehearsal of B9, which closes a whole run.
"""

import threading
import time
from collections.abc import Iterator
from pathlib import Path
from random import Random
from statistics import median

from hvhost.record.blockfile import BlockWriter, read_blocks
from hvhost.record.entries import BlockEntry, Damage, Entry
from hvhost.record.layout import EntryPacker
from hvhost.record.recorder import DiskFile, Recorder
from hvhost.record.repack import repack
from hvhost.speed.figures import Line, interleaved
from hvhost.speed.setting import Setting
from hvhost.supervisor.runs import Outcome
from hvhost.wire.frames import Block

SYNC_WATCH_S, SYNC_WATCH_QUICK_S = 10.0, 3.0
BLOCK_S = 0.032
FLIPS = 200


def measure(setting: Setting) -> list[Line]:
    """Return the lines of B8 but the size at rest."""
    return [_append(setting), _power_cut(setting), *_flipped(setting)]


def _blocks(setting: Setting) -> list[Block]:
    scene = setting.scene
    return scene.blocks(scene.hold)


def _append(setting: Setting) -> Line:
    folder, own = setting.place(), _blocks(setting)
    part = [own[k % len(own)] for k in range(setting.per_block)]
    ready = [EntryPacker(1, setting.scene.signs, k).pack_block(1.0, block) for k, block in enumerate(part)]
    plain, file = DiskFile(folder / "plain"), DiskFile(folder / "ours.hvb")
    writer = BlockWriter(file, mark=1, signs=setting.scene.signs)
    clock = time.thread_time

    def ours() -> list[float]:
        begun = clock()
        for block in part:
            writer.put_block(1.0, block)
        return [(clock() - begun) / len(part)]

    def other() -> list[float]:
        begun = clock()
        for data in ready:
            plain.write(data)
        return [(clock() - begun) / len(part)]

    sides = interleaved(ours, other, blocks=setting.blocks)
    plain.close()
    file.close()
    return Line(budget="B8", what="append of a block", measured=1.0 / sides.ratio, unit="x", bound=0.4, worst="least",
                against="a plain write of the same bytes",
                note=f"{median(s[0] for s in sides.ours) * 1e6:.1f} µs against "
                     f"{median(s[0] for s in sides.other) * 1e6:.1f} µs", raw=sides.raw())


class _Watched:
    """A file on disk that notes when its bytes were asked to last."""

    def __init__(self, path: Path) -> None:
        self._file = DiskFile(path)
        self.written: list[tuple[float, int]] = []
        self.synced: list[float] = []

    def write(self, data: bytes) -> int:
        done = self._file.write(data)
        self.written.append((time.monotonic(), done))
        return done

    def sync(self) -> None:
        self._file.sync()
        self.synced.append(time.monotonic())

    def close(self) -> None:
        self._file.close()


def _power_cut(setting: Setting) -> Line:
    """Record in real time; the oldest entry that was not yet on the disk when it was safe at last."""
    watched = _Watched(setting.place() / "synced.hvb")
    recorder = Recorder(watched, mark=1, signs=setting.scene.signs)
    recorder.begin({})
    recorder.start()
    own = _blocks(setting)
    seconds = SYNC_WATCH_QUICK_S if setting.minutes < 1.0 else SYNC_WATCH_S
    setting.say(f"recording for {seconds:g} s")
    put: list[float] = []
    wait = threading.Event()
    until = time.monotonic() + seconds
    while time.monotonic() < until:
        put.append(time.monotonic())
        recorder.put_block(put[-1], own[len(put) % len(own)])
        wait.wait(BLOCK_S)
    recorder.close(Outcome.CANCELLED)
    exposed = max(_exposure(put, watched.synced))
    return Line(budget="B8", what="lost at a power cut, at most", measured=exposed, unit="s", bound=1.0,
                against="from an entry's queueing to the end of the sync that covers it",
                note=f"{len(watched.synced)} syncs in {seconds:g} s",
                raw={"syncs": len(watched.synced), "seconds": seconds, "entries": len(put)})


def _exposure(put: list[float], synced: list[float]) -> Iterator[float]:
    """Seconds for which each entry could have been lost; a sync covers what was queued before the last one ended."""
    syncs = sorted(synced)
    for k, end in enumerate(syncs):
        begun = syncs[k - 1] if k else 0.0
        covered = [at for at in put if begun <= at < end]
        yield end - min(covered) if covered else 0.0


def _flipped(setting: Setting) -> list[Line]:
    folder, own = setting.place(), _blocks(setting)
    path, damaged = folder / "live.hvb", folder / "damaged.hvb"
    file = DiskFile(path)
    writer = BlockWriter(file, mark=1, signs=setting.scene.signs)
    for k, block in enumerate(own[:100]):
        writer.put_block(k * BLOCK_S, block)
    file.close()
    lines = []
    for name in ("live", "at rest"):
        if name == "at rest":
            repack(path)
        whole = _contents(path)
        rng, lost, silent = Random(1), [], 0
        data = path.read_bytes()
        for _ in range(FLIPS if setting.minutes >= 1.0 else FLIPS // 4):
            at = rng.randrange(len(data) * 8)
            flipped = bytearray(data)
            flipped[at >> 3] ^= 1 << (at & 7)
            damaged.write_bytes(flipped)
            found, told = _read(damaged)
            lost.append(len(whole) - sum(whole.get(seq) == content for seq, content in found.items()))
            silent += not told or any(whole.get(seq) != content for seq, content in found.items())
        lines.append(Line(
            budget="B8", what=f"blocks lost by one flipped bit, {name}", measured=float(max(lost)), unit="", bound=1.0,
            against=f"the same file whole, {len(lost)} flips",
            note="nothing silently" if not silent and min(lost) == 1 else f"{silent} wrong in silence",
            raw={"flips": len(lost), "most": max(lost), "least": min(lost), "silent": silent}))
        if silent:
            lines.append(Line(budget="B8", what=f"flipped bits without a word, {name}", measured=float(silent),
                              unit="", bound=0.0, against="every damage told"))
    return lines


def _contents(path: Path) -> dict[int, BlockEntry]:
    return _read(path)[0]


def _read(path: Path) -> tuple[dict[int, BlockEntry], bool]:
    """Return the blocks by sequence number, and whether any damage was told."""
    found: dict[int, BlockEntry] = {}
    told = False
    for entry in read_blocks(path):
        if isinstance(entry, Damage):
            told = True
        elif isinstance(entry, Entry) and isinstance(entry.content, BlockEntry):
            found[entry.seq] = entry.content
    return found, told
