"""Runs read back as arrays."""

from pathlib import Path

import numpy as np
import pytest

from hvhost.record.blockfile import BlockWriter, read_blocks
from hvhost.record.data import load_run, read_all
from hvhost.record.entries import AnchorEntry, BlockEntry, Entry, LineEntry, MetaEntry, Outcome
from hvhost.record.folder import RunFolder
from hvhost.record.recorder import InlineRecorder
from hvhost.record.repack import repack
from hvhost.wire.frames import Block
from hvhost.words.errors import RecordFault
from tests.record.making import OPENED_NS, OPENED_S, Case, Scripted, made_meta, made_run


def folder_of(tmp_path: Path, **changes: object) -> tuple[RunFolder, Scripted]:
    """A run being written."""
    meta = made_meta(**changes)
    folder = RunFolder.create(tmp_path, meta.run, OPENED_NS, meta.to_json(), {})
    return folder, Scripted(InlineRecorder.open(folder, meta.to_json(), tag=meta.tag, signs="ss"))


def test_codes_and_heads_equal_those_of_the_entries_one_by_one(tmp_path: Path) -> None:
    """The fast way to arrays and the plain way through entries give the same codes, live and at rest."""
    folder = made_run(tmp_path, Case(hold_s=1.0))
    plain = [e.content for e in read_blocks(folder.blocks)
             if isinstance(e, Entry) and isinstance(e.content, BlockEntry)]
    v = [c for b in plain for c in b.block.codes[0::2]]
    i = [c for b in plain for c in b.block.codes[1::2]]
    live = load_run(folder)
    assert not repack(folder.blocks).left
    for run in (live, load_run(folder)):
        assert run.v_code.tolist() == v
        assert run.i_code.tolist() == i
        assert run.head["arrival"].tolist() == [b.arrival_s for b in plain]
        assert run.index().tolist() == list(range(len(v)))
        assert run.rows == len(v)


def test_slices_agree_with_the_whole(tmp_path: Path) -> None:
    """Any range of rows gives the same values as the range of the whole."""
    run = load_run(made_run(tmp_path, Case(hold_s=1.0, lose=0)))
    for a, b in ((0, 1), (31, 33), (32, 64), (100, 1000), (run.rows - 1, run.rows), (5, 5)):
        assert np.array_equal(run.volts(a, b), run.volts()[a:b])
        assert np.array_equal(run.tick(a, b), run.tick()[a:b])
        assert np.array_equal(run.of_rows("v_word", a, b), run.of_rows("v_word")[a:b])


def test_a_gap_is_found_where_it_is(tmp_path: Path) -> None:
    """Missing pairs are marked before the row after them, and rows are found across the gap."""
    folder, script = folder_of(tmp_path)
    for _ in range(64):
        script.pair(100.0, 0.0)
    script.skip(10)
    for _ in range(32):
        script.pair(100.0, 0.0)
    script.recorder.close(Outcome.FINISHED)
    run = load_run(folder)
    assert [(g.row, g.missing) for g in run.gaps] == [(64, 10)]
    assert run.missing == 10
    assert [run.row_of(index) for index in (0, 63, 64, 70, 74, 75, 105, 500)] == [0, 63, 64, 64, 64, 65, 95, 96]
    assert run.row_of_tick(745) == 65


def test_indices_and_ticks_unwrap_and_notes_find_their_row(tmp_path: Path) -> None:
    """A counter that wraps in the run gives no jump and no gap; numbers are found modulo 2**32 and 2**31."""
    folder, script = folder_of(tmp_path)
    start = (1 << 32) - 40
    for k in range(4):
        index = (start + 32 * k) & 0xFFFFFFFF
        script.recorder.put_block(1.0 + k, Block(index, (index * 10) & 0xFFFFFFFF, 1, 1, 4, 0, 0, 0, 0, 0, (5, 6) * 32))
    script.recorder.close(Outcome.FINISHED)
    run = load_run(folder)
    assert np.array_equal(np.diff(run.index()), np.ones(127))
    assert np.array_equal(np.diff(run.tick()), np.full(127, 10))
    assert run.gaps == ()
    assert run.row_of(5) == run.row_of((1 << 32) + 5) == 45
    assert run.row_of(5, 31) == 45
    assert run.row_of(start - 7) == 0


def test_repeated_and_backward_blocks_are_left_out_and_counted(tmp_path: Path) -> None:
    """A block sent twice gives its samples once."""
    folder, script = folder_of(tmp_path)
    blocks = [Block(32 * k, 320 * k, 1, 1, 4, 0, 0, 0, 0, 0, (k, k) * 32) for k in range(3)]
    for block in (blocks[0], blocks[1], blocks[1], blocks[0], blocks[2]):
        script.recorder.put_block(1.0, block)
    script.recorder.close(Outcome.FINISHED)
    run = load_run(folder)
    assert (run.rows, run.repeated_blocks, run.missing) == (96, 2, 0)


def test_utc_follows_the_anchors_and_ignores_a_jump_of_the_wall_clock(tmp_path: Path) -> None:
    """Between anchors time is interpolated; a wall clock set an hour forward in the run changes no sample's UTC."""
    folder, script = folder_of(tmp_path)
    for _ in range(960):
        script.pair(0.0, 0.0)
    script.put(AnchorEntry(0, OPENED_S, OPENED_NS))
    script.put(AnchorEntry(9600, OPENED_S + 0.96 * 1.0001, OPENED_NS + 3_600_000_000_000))  # board 100 ppm slow
    script.recorder.close(Outcome.FINISHED)
    run = load_run(folder)
    utc = run.utc_ns(np.array([-10, 0, 4800, 9600, 9610], dtype=np.int64)) - OPENED_NS
    assert utc.tolist() == pytest.approx([-1_000_000, 0, 480_048_000, 960_096_000, 961_096_000], abs=1)


def test_without_anchors_the_earliest_arrival_sets_the_time(tmp_path: Path) -> None:
    """A run that was cut before its first anchor still has times, late by no more than the quickest block."""
    folder, script = folder_of(tmp_path)
    for _ in range(640):
        script.pair(0.0, 0.0)
    script.recorder.close(Outcome.FINISHED)
    run = load_run(folder)
    late = run.utc_ns(run.tick()) - OPENED_NS - 1_000_000 * np.arange(640)
    assert 0 <= late.min() == late.max() < 4_000_000


def test_a_run_with_a_damaged_meta_is_read_by_meta_json(tmp_path: Path) -> None:
    """The copy beside the block file stands in for a META entry that was lost; with neither it is a sentence."""
    folder = made_run(tmp_path, Case(hold_s=0.5))
    data = bytearray(folder.blocks.read_bytes())
    data[100] ^= 1
    folder.blocks.write_bytes(data)
    run = load_run(folder)
    assert run.meta.run == "0007"
    assert len(run.damage) == 1
    (folder.path / "meta.json").unlink()
    with pytest.raises(RecordFault, match="META entry or"):
        load_run(folder)


def test_a_run_without_a_block_file_is_empty(tmp_path: Path) -> None:
    """A crash between the folder and its block file leaves a run without samples, which can still be read."""
    meta = made_meta()
    run = load_run(RunFolder.create(tmp_path, meta.run, OPENED_NS, meta.to_json(), {}))
    assert (run.rows, run.missing, run.end, run.row_of(5)) == (0, 0, None, 0)
    assert run.utc_ns(run.tick()).tolist() == []


def test_events_said_again_are_taken_once(tmp_path: Path) -> None:
    """An MCU event that was asked for again is one event; a line that is no frame is passed over."""
    folder, script = folder_of(tmp_path)
    for body in (b"ev 4 100 hold 1 0", b"ev 5 110 cut 1 2", b"ev 4 100 hold 1 0", b"?"):
        script.put(LineEntry(1.0, body))
    script.recorder.close(Outcome.FINISHED)
    assert [e.number for e in load_run(folder).events] == [4, 5]


def test_impossible_blocks_are_damage_and_not_samples() -> None:
    """A block whose numbers the protocol does not allow is kept in the file and left out of the arrays."""
    class Bytes(bytearray):
        def write(self, data: bytes) -> int:
            self.extend(data)
            return len(data)

    sink = Bytes()
    writer = BlockWriter(sink, signs="uu")
    writer.put(MetaEntry({}))
    writer.put_block(1.0, Block(-1, 0, 0, 0, 0, 0, 0, 0, 0, 0, (1, 2)))
    found, blocks = read_all(bytes(sink))
    assert len(blocks.head) == 0
    assert "does not allow" in found.damage[0].text
