"""Bytes of one entry."""

import struct
from zlib import crc32

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.record.entries import (
    AnchorEntry,
    BlockEntry,
    CommandEntry,
    Content,
    EndEntry,
    EntryKind,
    GarbledEntry,
    LineEntry,
    LostEntry,
    MetaEntry,
    NoteEntry,
    SentEntry,
    TimerEntry,
)
from hvhost.record.layout import HEAD, LENGTH_MAX, MAGIC, OVERHEAD, EntryPacker, decode, json_bytes
from hvhost.wire.frames import Block
from hvhost.words.errors import RecordFault

EVERY: tuple[Content, ...] = (
    MetaEntry({"run": "1"}), LineEntry(1.5, b"ok 1 cut"), SentEntry(1.5, b"x\n"), CommandEntry(2.0, {"ask": "lower"}),
    TimerEntry(3.25), NoteEntry(7, {"what": "comment", "text": "µ"}), AnchorEntry(-5, 1.0, 2), LostEntry(9),
    GarbledEntry(1.0, "crc", 40), EndEntry({"outcome": "finished"}),
    BlockEntry(4.5, Block(1, 2, 3, 4, 5, 1, 6, 7, 8, 9, (-1, 2, 3, -4))))


def opened(data: bytes) -> tuple[EntryKind, int, int, Content]:
    """Read one entry by the struct module alone."""
    magic, kind, flags, _, length, seq = HEAD.unpack_from(data)
    assert magic == MAGIC
    assert len(data) == OVERHEAD + length
    assert struct.unpack("<I", data[-4:])[0] == crc32(data[:-4])
    return EntryKind(kind), flags, seq, decode(EntryKind(kind), flags, data[HEAD.size : -4])


@pytest.mark.parametrize("content", EVERY, ids=lambda c: type(c).__name__)
def test_every_kind_comes_back_equal(content: Content) -> None:
    """What is packed is read back equal, whatever its kind."""
    assert opened(EntryPacker(1, "ss").pack(content))[3] == content


def test_sequence_numbers_count_from_zero_and_wrap() -> None:
    """Each entry carries the next number, modulo 2**32."""
    packer = EntryPacker(1, "ss", seq=0xFFFFFFFF)
    assert [opened(packer.pack(c))[2] for c in EVERY[:3]] == [0xFFFFFFFF, 0, 1]


U16, U32 = st.integers(0, 65535), st.integers(0, 0xFFFFFFFF)


@given(st.floats(allow_nan=False), st.tuples(U32, U32, U16, U16, st.integers(0, 255), st.integers(0, 1), U16, U32, U32,
                                             U32), st.lists(st.tuples(U16, st.integers(-32768, 32767)), max_size=64))
def test_any_block_within_the_protocol_comes_back_equal(arrival_s: float, head: tuple[int, ...],
                                                        pairs: list[tuple[int, int]]) -> None:
    """A block of unsigned voltage and signed current codes survives the binary form."""
    block = Block(*head, tuple(code for pair in pairs for code in pair))
    kind, flags, _, content = opened(EntryPacker(7, "us").pack_block(arrival_s, block))
    assert (kind, flags & 4) == (EntryKind.BLOCK, 0)
    assert content == BlockEntry(arrival_s, block)


@given(st.integers(), st.integers(), st.lists(st.integers(), min_size=2, max_size=2))
def test_a_block_that_no_field_holds_is_kept_as_text(index: int, word: int, codes: list[int]) -> None:
    """Numbers that the protocol does not allow are recorded as they came, and raise nothing."""
    block = Block(index, 1, word, 1, 1, 0, 1, 1, 1, 1, tuple(codes))
    assert opened(EntryPacker(7, "uu").pack_block(1.0, block))[3] == BlockEntry(1.0, block)


def test_what_json_cannot_say_becomes_text() -> None:
    """NaN, infinity and foreign objects are recorded as words, never as broken JSON."""
    assert json_bytes({"a": float("nan"), "b": [float("inf")], "c": {1}}) == b'{"a":"NaN","b":["Infinity"],"c":"{1}"}'


def test_an_entry_too_long_to_be_read_back_is_refused() -> None:
    """The writer keeps the reader's bound."""
    with pytest.raises(RecordFault, match="at most"):
        EntryPacker(0).pack(LineEntry(1.0, b"x" * LENGTH_MAX))
