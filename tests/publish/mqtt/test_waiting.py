"""Events between loop and disk: each line once, jumps counted, a disk that fails costs nothing but time."""

import asyncio
import contextlib
import errno
import json
import os
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from hvhost.publish.mqtt import waiting as module
from hvhost.publish.mqtt.diskqueue import DiskQueue
from hvhost.publish.mqtt.waiting import FRESH_KEPT, Waiting
from hvhost.publish.snapshot import EventLine, Severity, Snapshot
from tests.pictures.states import IDLE


def shown(first: int, last: int) -> Snapshot:
    """A picture with these event lines."""
    return replace(IDLE, events=tuple(EventLine(utc_ns=n, text=f"line {n}", number=n) for n in range(first, last + 1)))


def stored(waiting: Waiting) -> list[str]:
    """What is on disk."""
    return [json.loads(payload)["text"] for _, payload in waiting.queue.read(0, 10_000)]


@contextlib.contextmanager
def failing(outcomes: list[bool]) -> Iterator[Any]:
    """An fsync that fails as listed, then works."""
    def fsync(fd: int) -> None:
        if outcomes and not outcomes.pop(0):
            raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))
    yield fsync


async def until_stored(waiting: Waiting, count: int) -> None:
    """Wait until so many are on disk."""
    async with asyncio.timeout(10):
        while waiting.queue.last < count:
            await asyncio.sleep(0.002)


def test_each_line_is_stored_once_and_jumps_are_counted(tmp_path: Path) -> None:
    """Snapshots repeat their last fifty lines; each becomes one event, and what no snapshot showed is counted."""
    async def scene() -> None:
        waiting = Waiting(DiskQueue(tmp_path, 10_000), print)
        await waiting.open()
        storing = asyncio.create_task(waiting.store())
        for first, last in ((1, 5), (1, 9), (3, 9), (13, 20)):
            waiting.pick(shown(first, last))
        await until_stored(waiting, 17)
        assert stored(waiting) == [f"line {n}" for n in (*range(1, 10), *range(13, 21))]
        assert (waiting.lost, waiting.lost_in_all) == (3, 3)
        storing.cancel()
        await waiting.close()
    asyncio.run(scene())


def test_what_is_left_at_the_end_is_written_once(tmp_path: Path) -> None:
    """A daemon that ends in the middle of a write leaves each event once, whatever the moment of its end."""
    async def scene(turns: int) -> None:
        waiting = Waiting(DiskQueue(tmp_path / str(turns), 10_000), print)
        await waiting.open()
        storing = asyncio.create_task(waiting.store())
        for n in range(1, 40):
            waiting.pick(shown(n, n))
        for _ in range(turns):
            await asyncio.sleep(0)
        waiting.pick(shown(40, 40))
        storing.cancel()
        await waiting.close()
        queue = DiskQueue(tmp_path / str(turns), 10_000)
        queue.open()
        assert [json.loads(p)["text"] for _, p in queue.read(0, 99)] == [f"line {n}" for n in range(1, 41)]
        queue.close()
    for turns in (0, 1, 2, 3, 4, 6, 9, 20):
        asyncio.run(scene(turns))


def test_a_full_disk_is_said_once_and_nothing_is_lost(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Events wait in memory until there is room again; the operator is told where to make it."""
    monkeypatch.setattr(module, "AGAIN_S", 0.01)

    async def scene(fsync: Any) -> None:
        said: list[str] = []
        waiting = Waiting(DiskQueue(tmp_path, 10_000, fsync=fsync), said.append)
        await waiting.open()
        storing = asyncio.create_task(waiting.store())
        waiting.pick(shown(1, 7))
        await until_stored(waiting, 7)
        assert stored(waiting) == [f"line {n}" for n in range(1, 8)]
        assert waiting.failed == 3
        assert len(said) == 1
        assert "No space left on device" in said[0]
        assert str(tmp_path) in said[0]
        storing.cancel()
        await waiting.close()
    with failing([False, False, False]) as fsync:
        asyncio.run(scene(fsync))


def test_memory_is_bounded_while_the_disk_takes_nothing(tmp_path: Path) -> None:
    """Beyond the bound the oldest go and are counted; a folder that was never opened closes without harm."""
    async def scene() -> None:
        waiting = Waiting(DiskQueue(tmp_path, 10_000), print)
        for n in range(1, FRESH_KEPT + 101):
            waiting.add(n, Severity.NOTE, "x" * 10_000)
        assert waiting.lost == 100
        assert len(waiting._fresh) == FRESH_KEPT
        assert all(len(event["text"]) == 500 for event in waiting._fresh)
        await waiting.close()
    asyncio.run(scene())


def test_a_queue_may_be_opened_again(tmp_path: Path) -> None:
    """The outlet's task may fail and be begun anew: no line is taken twice, none is left out."""
    async def scene() -> None:
        waiting = Waiting(DiskQueue(tmp_path, 10_000), print)
        for last in (3, 6):
            await waiting.open()
            storing = asyncio.create_task(waiting.store())
            waiting.pick(shown(1, last))
            await until_stored(waiting, last)
            storing.cancel()
            await waiting.close()
        waiting.queue.open()
        assert stored(waiting) == [f"line {n}" for n in range(1, 7)]
        waiting.queue.close()
    asyncio.run(scene())
