"""The block file under damage: cut at every byte, single flipped bits, zeros, strays."""

import io
import random
from pathlib import Path

import pytest

from hvhost.record.blockfile import BlockWriter, read_blocks, read_buffer, read_meta
from hvhost.record.entries import (
    BlockEntry,
    Content,
    Damage,
    DamageKind,
    EndEntry,
    Entry,
    LineEntry,
    MetaEntry,
    NoteEntry,
    TimerEntry,
)
from hvhost.record.repack import repack
from hvhost.wire.frames import Block
from hvhost.words.errors import RecordFault

MARK = 0xBEEF


def contents(blocks: int = 60) -> list[Content]:
    """A small run: META, blocks with other entries between them, END."""
    draw = random.Random(5)
    out: list[Content] = [MetaEntry({"run": "1", "bench": {"text": "x" * 400}})]
    for k in range(blocks):
        codes = tuple(draw.randrange(-40, 40) + 9000 for _ in range(64))
        out.append(BlockEntry(k * 0.032, Block(k * 32, k * 320, 1, 2, 4, 0, 0x6FF, 0, 3, 0, codes)))
        if k % 7 == 3:
            out.append(LineEntry(k * 0.032, b"ev 4 100 hold 1 0"))
        if k % 11 == 5:
            out += [TimerEntry(k * 0.032), NoteEntry(k, {"what": "comment", "text": "zeros \0\0"})]
    out.append(EndEntry({"outcome": "finished"}))
    return out


def written(entries: list[Content], mark: int = MARK) -> bytes:
    """Bytes of the live form."""
    sink = io.BytesIO()
    writer = BlockWriter(sink, mark=mark, signs="ss")
    for entry in entries:
        writer.put(entry)
    assert writer.written_bytes == len(sink.getvalue())
    return sink.getvalue()


@pytest.fixture(params=["live", "at rest"])
def file(request: pytest.FixtureRequest, tmp_path: Path) -> bytes:
    """The same run in both forms."""
    data = written(contents())
    if request.param == "live":
        return data
    path = tmp_path / "run.hvb"
    path.write_bytes(data)
    assert not repack(path).left
    return path.read_bytes()


def sorted_out(data: bytes) -> tuple[list[Entry], list[Damage]]:
    """Entries and damages of a file."""
    found = list(read_buffer(data))
    return [f for f in found if isinstance(f, Entry)], [f for f in found if isinstance(f, Damage)]


def test_a_sound_file_reads_back_whole(file: bytes) -> None:
    """Every entry comes back equal, in order, without a damage."""
    entries, damages = sorted_out(file)
    assert [e.content for e in entries] == contents()
    assert damages == []


def test_cut_at_every_byte_of_the_last_ten_blocks(file: bytes) -> None:
    """Every complete entry comes back; a cut inside one is reported as torn, a cut between two is a clean end."""
    whole, _ = sorted_out(file)
    blocks = [e for e in whole if isinstance(e.content, BlockEntry)]
    ends = {e.offset + e.size for e in whole}
    for cut in range(blocks[-10].offset, len(file)):
        entries, damages = sorted_out(file[:cut])
        complete = [e for e in whole if e.offset + e.size <= cut]
        assert entries == complete
        assert [d.kind for d in damages] == ([] if cut in ends else [DamageKind.TORN])


def test_a_thousand_single_flipped_bits_each_lose_exactly_one_entry(file: bytes) -> None:
    """Wherever a bit turns over, one entry is absent, it is reported, and every other one is as it was."""
    whole, _ = sorted_out(file)
    draw = random.Random(11)
    for _ in range(1000):
        bit = draw.randrange(len(file) * 8)
        bad = bytearray(file)
        bad[bit >> 3] ^= 1 << (bit & 7)
        hit = next(e for e in whole if e.offset <= bit >> 3 < e.offset + e.size)
        entries, damages = sorted_out(bytes(bad))
        assert entries == [e for e in whole if e is not hit]
        assert sum(d.entries for d in damages) == 1
        assert damages[0].offset == hit.offset


def test_a_tail_of_zeros_is_reported_and_not_read(file: bytes) -> None:
    """Zeros that a power cut left at the end are named as such."""
    entries, damages = sorted_out(file + b"\0" * 4096)
    assert len(entries) == len(contents())
    assert [(d.kind, d.offset, d.size) for d in damages] == [(DamageKind.ZEROED, len(file), 4096)]


def test_a_torn_entry_before_zeros_gives_both_damages(file: bytes) -> None:
    """A torn entry and the zeros behind it are told apart."""
    _, damages = sorted_out(file[:-5] + b"\0" * 512)
    assert [d.kind for d in damages] == [DamageKind.TORN, DamageKind.ZEROED]


def test_zeros_in_the_middle_are_reported_with_what_they_cost(file: bytes) -> None:
    """A page of zeros costs the entries that it covers, by their sequence numbers."""
    whole, _ = sorted_out(file)
    first, last = whole[20], whole[22]
    hole = bytes(last.offset + last.size - first.offset)
    _, damages = sorted_out(file[: first.offset] + hole + file[last.offset + last.size :])
    assert [(d.kind, d.entries, d.size) for d in damages] == [(DamageKind.ZEROED, 3, len(hole))]


def test_removed_entries_are_missed_by_their_numbers(file: bytes) -> None:
    """Entries cut out cleanly leave a gap in the numbers, and that is said."""
    whole, _ = sorted_out(file)
    _, damages = sorted_out(file[: whole[10].offset] + file[whole[14].offset :])
    assert [(d.kind, d.entries, d.size) for d in damages] == [(DamageKind.MISSING, 4, 0)]


def test_a_repeated_stretch_is_left_out_and_reported(file: bytes) -> None:
    """Entries that were read before are not read twice."""
    whole, _ = sorted_out(file)
    stretch = file[whole[3].offset : whole[5].offset]
    entries, damages = sorted_out(file[: whole[9].offset] + stretch + file[whole[9].offset :])
    assert [e.content for e in entries] == contents()
    assert [d.kind for d in damages] == [DamageKind.REPEATED] * 2


def test_a_stray_of_another_run_does_not_pass_for_ours() -> None:
    """A sound entry with another run's mark is damage, whatever its sequence number."""
    ours, stray = written(contents()), written(contents(), mark=1)
    entries, _ = sorted_out(ours)
    cut = entries[30].offset
    others, damages = sorted_out(ours[:cut] + stray[cut:])
    assert [e.content for e in others] == contents()[:30]
    assert damages


def test_an_unknown_kind_is_reported_and_passed_over() -> None:
    """A newer file's entry does not stop this reader."""
    sink = io.BytesIO()
    writer = BlockWriter(sink, mark=MARK)
    writer.put(MetaEntry({}))
    sink.write(writer._packer.seal(99, 0, b"new"))  # type: ignore[arg-type]
    writer.put(EndEntry({}))
    entries, damages = sorted_out(sink.getvalue())
    assert len(entries) == 2
    assert damages[0].kind is DamageKind.UNKNOWN


@pytest.mark.parametrize("junk", [b"", b"\xf5", b"\xf5\x9a" * 500, b"hello" * 99, bytes(range(256)) * 4])
def test_bytes_that_are_no_record_give_damage_only(junk: bytes) -> None:
    """Any bytes can be read; nothing is invented from them."""
    entries, damages = sorted_out(junk)
    assert entries == []
    assert sum(d.size for d in damages) == len(junk)


def test_a_file_is_read_from_disk_and_one_that_cannot_be_is_a_sentence(tmp_path: Path) -> None:
    """The path form gives the same entries; a missing file says where and what to do."""
    path = tmp_path / "run.hvb"
    path.write_bytes(written(contents()))
    assert len(list(read_blocks(path))) == len(contents())
    found = read_meta(path)
    assert found is not None
    assert found.data["run"] == "1"
    path.write_bytes(b"")
    assert list(read_blocks(path)) == []
    assert read_meta(path) is None
    with pytest.raises(RecordFault, match="readable block file"):
        list(read_blocks(tmp_path / "absent"))
