"""The recorder: never drops in silence, whatever the disk does."""

import errno
import threading
from pathlib import Path
from typing import Any

import pytest

from hvhost.record.blockfile import read_buffer
from hvhost.record.entries import BlockEntry, Damage, EndEntry, Entry, LostEntry, MetaEntry, NoteEntry, Outcome
from hvhost.record.folder import RunFolder
from hvhost.record.recorder import CHUNK, SYNC_S, InlineRecorder, Recorder
from hvhost.record.recovery import being_written
from hvhost.wire.frames import Block
from hvhost.words.errors import RecordFault
from tests.record.making import OPENED_NS, TAG, made_meta


class FailingFile:
    """A file whose n-th call of one kind fails, once or for ever; a failing write may take a part first."""

    def __init__(self, call: str = "", at: int = 0, for_ever: bool = False, part: float = 0.0) -> None:
        self.data = bytearray()
        self.synced = 0
        self.closed = False
        self._parted = False
        self._call, self._at, self._for_ever, self._part = call, at, for_ever, part
        self._counts = {"write": 0, "sync": 0}

    def _fails(self, call: str) -> bool:
        self._counts[call] += 1
        count = self._counts[call]
        return call == self._call and (count == self._at or (self._for_ever and count > self._at))

    def write(self, data: bytes) -> int:
        """Append, or take a part and fail at the next call."""
        if self._fails("write"):
            if self._part and not self._parted:  # a full disk takes a part, and nothing at the next call
                self._parted = True
                self._at += 1
                taken = max(1, int(len(data) * self._part))
                self.data += data[:taken]
                return taken
            raise OSError(errno.ENOSPC, "No space left on device")
        taken = max(1, len(data) - 3)  # a write may take less than it was given
        self.data += data[:taken]
        return taken

    def sync(self) -> None:
        """Note what is safe."""
        if self._fails("sync"):
            raise OSError(errno.EIO, "Input/output error")
        self.synced = len(self.data)

    def close(self) -> None:
        """Note it."""
        self.closed = True


def block(k: int) -> Block:
    """The k-th block of four pairs."""
    return Block(4 * k, 40 * k, 1, 2, 4, 0, 0, 0, 1, 0, (k, 1, 2, 3, 4, 5, 6, 7))


def stepped(file: FailingFile, rounds: int = 6, each: int = 10, queue_max: int = 1000) -> tuple[Recorder, list[str]]:
    """Record ``rounds`` batches of blocks, stepping by hand, and close."""
    told: list[str] = []
    recorder = Recorder(file, mark=TAG, signs="uu", on_failed=told.append, queue_max=queue_max)
    recorder.begin({"run": "1"})
    for n in range(rounds):
        for k in range(each):
            recorder.put_block(n + k / 100, block(n * each + k))
        recorder.step(1e9 + n)
    recorder.close(Outcome.FINISHED)
    return recorder, told


def found_in(data: bytes | bytearray) -> tuple[list[Entry], list[Damage]]:
    """Entries and damages."""
    found = list(read_buffer(bytes(data)))
    return [f for f in found if isinstance(f, Entry)], [f for f in found if isinstance(f, Damage)]


def test_everything_put_is_written_in_order() -> None:
    """META first, then what was put, END last with the count before it."""
    file = FailingFile()
    recorder, told = stepped(file)
    entries, damages = found_in(file.data)
    assert damages == []
    assert told == []
    assert isinstance(entries[0].content, MetaEntry)
    assert [e.content.block for e in entries if isinstance(e.content, BlockEntry)] == [block(k) for k in range(60)]
    end = entries[-1].content
    assert isinstance(end, EndEntry)
    assert end.data == {"outcome": "finished", "failed": "", "entries": 61, "lost": 0}
    assert recorder.health().written_bytes == len(file.data) == file.synced
    assert file.closed


@pytest.mark.parametrize("for_ever", [False, True])
@pytest.mark.parametrize("part", [0.0, 0.37])
@pytest.mark.parametrize("at", range(2, 24))
def test_a_failing_write_is_told_once_and_leaves_no_silent_hole(at: int, part: float, for_ever: bool) -> None:
    """The n-th write fails, once or for ever, perhaps after a part: what is absent is counted or shows by numbers."""
    file = FailingFile("write", at, for_ever, part)
    recorder, told = stepped(file)
    entries, damages = found_in(file.data)
    blocks = [e.content.block for e in entries if isinstance(e.content, BlockEntry)]
    ended = bool(entries) and isinstance(entries[-1].content, EndEntry)
    assert len(told) == bool(recorder.failed)
    assert told or (len(blocks) == 60 and ended)
    assert blocks == sorted(blocks, key=lambda b: b.index)
    if ended:  # then every hole shows by its sequence numbers
        assert len(entries) + sum(d.entries for d in damages) == entries[-1].content.data["entries"] + 1
    assert recorder.health().lost == 62 - len(entries)


@pytest.mark.parametrize("for_ever", [False, True])
@pytest.mark.parametrize("at", range(2, 7))
def test_a_failed_sync_is_never_taken_back(at: int, for_ever: bool) -> None:
    """One failed fsync ends the run: a later one that succeeds does not make it good."""
    file = FailingFile("sync", at, for_ever)
    recorder, told = stepped(file)
    assert told == ["syncing the record failed: Input/output error"]
    assert recorder.failed == told[0]
    entries, _ = found_in(file.data)
    end = entries[-1].content
    assert isinstance(end, EndEntry)
    assert end.data["failed"].startswith("syncing") or at == 7


def test_a_full_queue_refuses_and_says_how_many_at_that_place() -> None:
    """A disk that does not keep up fails the run; the record says how many entries are absent and where."""
    file, told = FailingFile(), []
    recorder = Recorder(file, mark=TAG, signs="uu", on_failed=told.append, queue_max=10)
    recorder.begin({})
    for k in range(25):
        recorder.put_block(k, block(k))
    assert told == ["the recorder's queue is full: the disk does not keep up"]
    assert recorder.health().lost == 15
    recorder.step(0.0)
    recorder.put_block(99.0, block(99))
    recorder.close(Outcome.RECORD_FAILED)
    entries, damages = found_in(file.data)
    assert damages == []
    kinds = [type(e.content) for e in entries]
    assert kinds[11] is LostEntry
    assert entries[11].content == LostEntry(15)
    assert len(entries) == 1 + 10 + 1 + 1 + 1


def test_more_than_a_chunk_is_written_in_one_step() -> None:
    """A step empties the queue, however long it is."""
    file = FailingFile()
    recorder = Recorder(file, mark=0, signs="uu")
    for k in range(3 * CHUNK + 1):
        recorder.put_block(k, block(k))
    recorder.step(0.0)
    assert recorder.health().queued == 0


def test_an_entry_that_cannot_be_packed_is_owned_up() -> None:
    """A content of a wrong form fails the recorder and leaves a LOST entry, not a broken file."""
    file, told = FailingFile(), []
    recorder = Recorder(file, mark=0, signs="uu", on_failed=told.append)
    recorder.put(NoteEntry("no number", {}))  # type: ignore[arg-type]
    bad: Any = object()
    recorder.put(bad)
    recorder.close(Outcome.FINISHED)
    entries, damages = found_in(file.data)
    assert damages == []
    assert len(told) == 1
    assert entries[0].content == LostEntry(1)


def test_syncs_are_no_rarer_than_their_period() -> None:
    """Unsynced data is synced when the period has passed and not before."""
    file = FailingFile()
    recorder = Recorder(file, mark=0, signs="uu")
    recorder.put_block(0.0, block(0))
    base = recorder._synced_s
    recorder.step(base + SYNC_S / 2)
    assert file.synced == 0
    recorder.step(base + SYNC_S)
    assert file.synced == len(file.data)


def folder_in(tmp_path: Path) -> RunFolder:
    """A new run folder."""
    return RunFolder.create(tmp_path, "1", OPENED_NS, made_meta().to_json(), {})


def test_on_disk_the_thread_writes_what_many_threads_put(tmp_path: Path) -> None:
    """The real recorder: entries put from here are on disk at the close, and the file was locked meanwhile."""
    folder = folder_in(tmp_path)
    recorder = Recorder.open(folder, {"run": "1"}, tag=TAG)
    assert being_written(folder)
    for k in range(500):
        recorder.put_block(k / 100, block(k))
    health = recorder.close(Outcome.FINISHED, why="done")
    assert not being_written(folder)
    assert (health.failed, health.lost, health.queued) == ("", 0, 0)
    entries, damages = found_in(folder.blocks.read_bytes())
    assert damages == []
    assert len(entries) == 502
    assert threading.active_count() >= 1


def test_an_existing_block_file_is_never_written_over(tmp_path: Path) -> None:
    """Opening a record twice in one folder is refused."""
    folder = folder_in(tmp_path)
    folder.blocks.write_bytes(b"old")
    for kind in (Recorder, InlineRecorder):
        with pytest.raises(RecordFault, match="File exists"):
            kind.open(folder, {}, tag=1)
    assert folder.blocks.read_bytes() == b"old"


def test_a_record_that_cannot_be_begun_is_refused() -> None:
    """Where META cannot be written the recorder is failed from the beginning."""
    recorder = Recorder(FailingFile("write", 1, for_ever=True), mark=0, signs="uu")
    recorder.begin({})
    assert "No space left" in recorder.failed


def test_inline_and_threaded_recorders_write_the_same_bytes(tmp_path: Path) -> None:
    """A rehearsal's record and a live one of the same contents are equal, byte for byte."""
    one, other = folder_in(tmp_path / "a"), folder_in(tmp_path / "b")
    for recorder in (Recorder.open(one, {"r": 1}, tag=TAG), InlineRecorder.open(other, {"r": 1}, tag=TAG)):
        for k in range(20):
            recorder.put_block(k, block(k))
        recorder.put(NoteEntry(5, {"what": "comment"}))
        recorder.close(Outcome.FINISHED)
    assert one.blocks.read_bytes() == other.blocks.read_bytes()
