"""Events on disk: in order, at least once, through restarts, damage and full disks; one number never means two."""

import errno
import json
import os
import shutil
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hvhost.publish.mqtt.diskqueue import SEGMENT_LINES, DiskQueue
from hvhost.words.errors import RecordFault

MOST = 100_000


def opened(folder: Path, most: int = MOST) -> DiskQueue:
    """A queue in use."""
    queue = DiskQueue(folder, most)
    queue.open()
    return queue


def events(first: int, count: int) -> list[dict[str, object]]:
    """Payloads that know their number."""
    return [{"t": n, "text": f"event {n}"} for n in range(first, first + count)]


def texts(queue: DiskQueue, after: int | None = None, most: int = MOST) -> list[str]:
    """What waits."""
    return [json.loads(payload)["text"]
            for _, payload in queue.read(queue.delivered if after is None else after, most)]


def test_what_was_appended_is_read_in_order_after_a_restart(tmp_path: Path) -> None:
    """Numbers rise by one through a restart, and the ids stay of one series."""
    queue = opened(tmp_path)
    queue.append(events(1, 3))
    queue.close()
    queue = opened(tmp_path)
    queue.append(events(4, 2))
    read = queue.read(0, 10)
    assert [number for number, _ in read] == [1, 2, 3, 4, 5]
    found = [json.loads(payload) for _, payload in read]
    assert [one["seq"] for one in found] == [1, 2, 3, 4, 5]
    assert {one["id"] for one in found} == {f"{queue.identity}-{n}" for n in range(1, 6)}
    assert queue.waiting == 5


def test_what_was_delivered_is_gone_also_after_a_restart(tmp_path: Path) -> None:
    """Delivered events do not come again, files that are done with are removed, the newest stays for its number."""
    queue = opened(tmp_path)
    queue.append(events(1, SEGMENT_LINES + 5))
    assert len(list(tmp_path.glob("events-*.log"))) == 2
    queue.deliver(SEGMENT_LINES + 5)
    assert len(list(tmp_path.glob("events-*.log"))) == 1
    queue.close()
    queue = opened(tmp_path)
    assert (queue.waiting, texts(queue)) == (0, [])
    queue.append(events(1, 1))
    assert queue.last == SEGMENT_LINES + 6


def test_an_hour_at_ten_a_second_is_read_in_pieces(tmp_path: Path) -> None:
    """36,000 events come back in pieces of 64, each once; reading goes on where it was, not from the start."""
    queue = opened(tmp_path)
    for first in range(1, 36_001, 400):
        queue.append(events(first, 400))
    got: list[int] = []
    while piece := queue.read(queue.delivered, 64):
        got.extend(number for number, _ in piece)
        queue.deliver(piece[-1][0])
    assert got == list(range(1, 36_001))
    assert sum(path.stat().st_size for path in tmp_path.glob("*")) < 200_000


def test_the_bound_drops_the_oldest_and_counts(tmp_path: Path) -> None:
    """Beyond the bound whole files go, oldest first; what is left is in order and the loss is known."""
    queue = opened(tmp_path, most=2500)
    queue.append(events(1, 6000))
    assert queue.waiting <= 2500
    assert queue.lost == 6000 - queue.waiting
    assert texts(queue) == [f"event {n}" for n in range(queue.lost + 1, 6001)]


def test_two_daemons_do_not_share_a_folder(tmp_path: Path) -> None:
    """The second one is told what to do; after the first has gone it may have it."""
    queue = opened(tmp_path)
    with pytest.raises(RecordFault, match="another daemon"):
        opened(tmp_path)
    queue.close()
    opened(tmp_path).close()


def test_a_folder_that_cannot_be_made_is_a_sentence(tmp_path: Path) -> None:
    """A file in the way is told with its path and a remedy."""
    (tmp_path / "file").write_text("")
    with pytest.raises(RecordFault, match="queue_folder"):
        opened(tmp_path / "file" / "queue")


def test_a_queue_cut_at_every_byte_gives_every_whole_event(tmp_path: Path) -> None:
    """Killed at any byte of the last lines: every line before is read, none is wrong, no number returns."""
    queue = opened(tmp_path / "whole")
    queue.append(events(1, 12))
    queue.close()
    (path,) = (tmp_path / "whole").glob("events-*.log")
    data = path.read_bytes()
    ends = [n + 1 for n, byte in enumerate(data) if byte == 10]
    for at in range(ends[10], len(data) + 1):
        shutil.copytree(tmp_path / "whole", tmp_path / "cut", dirs_exist_ok=True)
        (tmp_path / "cut" / path.name).write_bytes(data[:at])
        again = opened(tmp_path / "cut")
        whole = sum(end <= at for end in ends)
        again.append(events(13, 1))
        assert again.last > whole
        assert texts(again) == [*(f"event {n}" for n in range(1, whole + 1)), "event 13"]
        again.close()
        shutil.rmtree(tmp_path / "cut")


@given(st.lists(st.tuples(st.integers(0, 10_000), st.integers(0, 7)), min_size=1, max_size=6))
@settings(max_examples=60)
def test_flipped_bits_lose_their_own_lines_only(tmp_path_factory: pytest.TempPathFactory,
                                                flips: list[tuple[int, int]]) -> None:
    """Each damaged line is skipped and counted; every other event comes, unchanged and in order."""
    folder = tmp_path_factory.mktemp("flips")
    queue = opened(folder)
    queue.append(events(1, 20))
    queue.close()
    (path,) = folder.glob("events-*.log")
    data = bytearray(path.read_bytes())
    before = bytes(data)
    for at, bit in flips:
        data[at % len(data)] ^= 1 << bit
    path.write_bytes(data)
    again = opened(folder)
    again.append(events(21, 1))
    got = texts(again)
    sound = [f"event {n}" for n, (old, new) in enumerate(zip(before.split(b"\n"), bytes(data).split(b"\n"),
                                                            strict=False), 1) if old == new and n <= 20]
    if data.count(b"\n") == 20 and before.count(b"\n") == 20:
        assert got == [*sound, "event 21"]
    assert set(got) <= {f"event {n}" for n in range(1, 22)}
    assert got == sorted(got, key=lambda words: int(words.split()[1]))
    assert got[-1] == "event 21"
    assert again.last > 20
    again.close()


def test_a_queue_whose_tail_is_damaged_does_not_wait_for_it(tmp_path: Path) -> None:
    """Damage behind the last good line is counted and forgotten: nothing is left waiting for ever."""
    queue = opened(tmp_path)
    queue.append(events(1, 3))
    queue.close()
    (path,) = tmp_path.glob("events-*.log")
    path.write_bytes(path.read_bytes()[:-3])
    queue = opened(tmp_path)
    assert texts(queue) == ["event 1", "event 2"]
    queue.deliver(2)
    assert texts(queue) == []
    assert (queue.waiting, queue.damaged) == (0, 1)


@pytest.mark.parametrize("spoilt", [0, 1])
def test_a_spoilt_slot_repeats_and_never_skips(tmp_path: Path, spoilt: int) -> None:
    """Either slot of what was delivered may be lost: events may come again, none is left out."""
    queue = opened(tmp_path)
    queue.append(events(1, 10))
    queue.deliver(4)
    queue.deliver(7)
    queue.close()
    data = bytearray((tmp_path / "delivered").read_bytes())
    data[spoilt * 64 + 12] ^= 1
    (tmp_path / "delivered").write_bytes(data)
    assert texts(opened(tmp_path)) == [f"event {n}" for n in range(5 if spoilt else 8, 11)]


def test_a_lost_identity_begins_a_new_series(tmp_path: Path) -> None:
    """An id must never mean two events: where the series' name is lost, a new one begins."""
    queue = opened(tmp_path)
    first = queue.identity
    queue.append(events(1, 1))
    queue.close()
    (tmp_path / "identity").write_text("spoilt")
    queue = opened(tmp_path)
    assert queue.identity != first
    assert texts(queue) == ["event 1"], "its id stays the one that it had"


class FullDisk:
    """Fails the n-th and later calls, once or for ever."""

    def __init__(self, at: int, often: int) -> None:
        self.at, self.often, self.calls = at, often, 0

    def __call__(self, fd: int) -> None:
        self.calls += 1
        if self.at <= self.calls < self.at + self.often:
            raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))


@pytest.mark.parametrize("at", range(1, 6))
@pytest.mark.parametrize("often", [1, 2])
def test_a_disk_that_fails_loses_nothing_that_counts(tmp_path: Path, at: int, often: int) -> None:
    """A failed fsync is no success: the batch is written anew, once, in a new file, and its numbers hold."""
    disk = FullDisk(at, often)
    queue = DiskQueue(tmp_path, MOST, fsync=disk)
    queue.open()
    first = 1
    while first <= 12:
        try:
            queue.append(events(first, 3))
        except OSError:
            assert queue.last == first - 1
            continue
        first += 3
    assert texts(queue) == [f"event {n}" for n in range(1, 13)]
    queue.close()
    queue = opened(tmp_path)
    assert texts(queue) == [f"event {n}" for n in range(1, 13)]
    assert [number for number, _ in queue.read(0, 99)] == list(range(1, 13))


def test_a_foreign_file_in_the_folder_is_left_alone(tmp_path: Path) -> None:
    """Only names of our own form are ours."""
    (tmp_path / "events-old.log").write_text("of somebody else")
    queue = opened(tmp_path)
    queue.append(events(1, 1))
    assert texts(queue) == ["event 1"]
    assert (tmp_path / "events-old.log").exists()
