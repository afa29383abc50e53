"""The form at rest of single payloads."""

import struct

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.record.entries import EntryKind
from hvhost.record.layout import HEAD, PACKED, EntryPacker, encode
from hvhost.record.pack import pack_payload, unpack_payload
from hvhost.wire.frames import Block, Renew, encode_request
from hvhost.wire.lines import seal
from tests.record.test_layout import EVERY

CODE = st.integers(-32768, 32767)


def payload_of(block: Block, signs: str) -> tuple[int, bytes]:
    """Flags and payload of a packed block entry."""
    data = EntryPacker(0, signs).pack_block(1.25, block)
    return data[3], data[HEAD.size : -4]


@given(st.lists(st.tuples(CODE, CODE), min_size=1, max_size=64), st.integers(0, 70_000))
def test_any_block_unpacks_to_the_bytes_that_were_written(pairs: list[tuple[int, int]], missed: int) -> None:
    """The form at rest loses nothing, for the quietest and the wildest codes."""
    block = Block(1, 2, 3, 4, 5, 0, 6, missed, 8, 9, tuple(c for pair in pairs for c in pair))
    flags, payload = payload_of(block, "ss")
    at_rest = pack_payload(EntryKind.BLOCK, flags, payload)
    assert len(at_rest[1]) <= len(payload)
    back = unpack_payload(EntryKind.BLOCK, *at_rest) if at_rest[0] & PACKED else at_rest
    assert back == (flags, payload)


def test_a_quiet_block_becomes_much_shorter() -> None:
    """Codes that differ by a few need a few bits each."""
    block = Block(1, 2, 3, 4, 5, 0, 6, 7, 8, 9, tuple(40_000 + k % 12 for k in range(64)))
    flags, payload = payload_of(block, "uu")
    assert len(pack_payload(EntryKind.BLOCK, flags, payload)[1]) < 0.5 * len(payload)


LINES = (seal(encode_request(Renew(session=0x12AB, index=4_000_000_000))), seal(b"cut 3 0"), b"\n" + seal(b"cut 3 0"),
         seal(b"renew 000012ab 7"), seal(b"renew 000012AB 07"), b"", b"renew", seal(b"renew"))


@pytest.mark.parametrize("line", LINES)
def test_sent_lines_come_back_byte_for_byte(line: bytes) -> None:
    """Whatever was sent, also what is not of our own form, unpacks to the same bytes."""
    payload = b"\0" * 8 + line
    flags, shorter = pack_payload(EntryKind.SENT, 0, payload)
    assert (unpack_payload(EntryKind.SENT, flags, shorter) if flags & PACKED else (flags, shorter)) == (0, payload)


@pytest.mark.parametrize("content", EVERY[:-1], ids=lambda c: type(c).__name__)
def test_every_other_kind_comes_back(content: object) -> None:
    """Texts are compressed, the rest stays, and all come back."""
    kind, flags, payload = encode(content)  # type: ignore[arg-type]
    new, shorter = pack_payload(kind, flags, payload)
    assert (unpack_payload(kind, new, shorter) if new & PACKED else (new, shorter)) == (flags, payload)


@pytest.mark.parametrize("data", [b"", b"\0" * 40, b"\0" * 40 + b"\xff" * 9])
def test_a_malformed_packed_block_is_refused(data: bytes) -> None:
    """A payload that does not fit its own frame raises, and reads nothing wrong."""
    broken = data[:30] + b"\x05" + data[31:] if len(data) > 31 else data
    with pytest.raises((ValueError, struct.error), match=r"packed codes|requires a buffer"):
        unpack_payload(EntryKind.BLOCK, PACKED, broken)


def test_a_stream_that_would_grow_without_bound_is_refused() -> None:
    """A torn zlib stream raises."""
    kind, _, payload = encode(EVERY[0])
    packed = pack_payload(kind, 0, payload * 50)[1]
    with pytest.raises(ValueError, match="whole zlib stream"):
        unpack_payload(kind, PACKED, packed[:-3])
