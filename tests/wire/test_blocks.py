"""Blocks: packing, strict reading, base64 by its published vectors."""

from collections.abc import Callable

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.wire.blocks import Block, _decode_any, decode_block, encode_block, pack_codes, unpack_codes
from hvhost.wire.lines import LINE_MAX, seal
from hvhost.words.errors import WireFault

u32 = st.integers(0, 0xFFFFFFFF)
u16 = st.integers(0, 0xFFFF)
CODES = {"s": st.integers(-32768, 32767), "u": u16}


@st.composite
def blocks(draw: st.DrawFn) -> tuple[str, Block]:
    """Any block of either coding."""
    signs = draw(st.sampled_from(("ss", "uu", "su", "us")))
    pairs = draw(st.integers(1, 64))
    codes = tuple(draw(CODES[signs[k % 2]]) for k in range(2 * pairs))
    return signs, Block(draw(u32), draw(u32), draw(u16), draw(u16), draw(st.integers(0, 6)), draw(st.integers(0, 1)),
                        draw(u32), draw(u32), draw(u32), draw(u32), codes)


@given(blocks())
def test_a_block_comes_back_and_fits_a_line(made: tuple[str, Block]) -> None:
    """Encoding and decoding return the block, whatever its coding, and the line is within the maximum."""
    signs, block = made
    body = encode_block(block, signs)
    assert decode_block(body, signs) == block
    assert decode_block(body + b" later=1 more=x", signs) == block
    assert len(seal(body)) <= LINE_MAX


@pytest.mark.parametrize(("plain", "coded"), [
    (b"foobar", b"Zm9vYmFy"),  # RFC 4648 section 10 (the vectors of 4 n bytes or less fit no pair)
    (b"foob", b"Zm9vYg=="),
])
def test_base64_is_that_of_the_rfc(plain: bytes, coded: bytes) -> None:
    """RFC 4648 section 10: 'foob' and the first six letters of 'foobar' have these codes."""
    words = [int.from_bytes(plain[k : k + 2], "little") for k in range(0, len(plain), 2)]
    if len(words) % 2:
        words.append(0)
        assert pack_codes(tuple(words), "uu").startswith(coded)
    else:
        assert pack_codes(tuple(words), "uu") == coded
        assert unpack_codes(coded, "uu", len(words) // 2) == tuple(words)


GOOD = b"b 123 1230 500 600 4 0 7F 0 9 1 1 Zm9vYg=="


@pytest.mark.parametrize("body", [
    b"b", b"b ", b"b 1 2 3", GOOD[:-1], GOOD[:-4], GOOD.replace(b"123 ", b"0123 "), GOOD.replace(b"123 ", b"+123 "),
    GOOD.replace(b" 123 ", b" 4294967296 "), GOOD.replace(b"500", b"65536"), GOOD.replace(b"500", b"-500"),
    GOOD.replace(b" 4 0 ", b" 7 0 "), GOOD.replace(b" 4 0 ", b" 4 2 "), GOOD.replace(b"7F", b"7f"),
    GOOD.replace(b"7F", b"07F"), GOOD.replace(b" 1 Zm", b" 2 Zm"), GOOD.replace(b" 1 Zm", b" 0 Zm"),
    GOOD.replace(b" 1 Zm", b" 65 Zm"), GOOD.replace(b"Zm9v", b"Zm9!"), GOOD.replace(b"123 ", b"1_3 "),
    GOOD.replace(b" 500", b"  500"), GOOD + b" ", GOOD.replace(b"==", b"A="), b"bb" + GOOD[1:],
])
def test_a_malformed_block_is_refused(body: bytes) -> None:
    """Each field out of its grammar or range is a fault, never another number."""
    with pytest.raises(WireFault):
        decode_block(body, "uu")


def test_the_good_one_is_read() -> None:
    """The body from which the malformed ones are made is itself good."""
    assert decode_block(GOOD, "uu").codes == (0x6F66, 0x626F)
    assert decode_block(GOOD, "uu").pairs == 1


@pytest.mark.parametrize("pairs", [1, 8, 32, 63, 64])
def test_blocks_of_each_length(pairs: int) -> None:
    """From one pair to sixty-four."""
    block = Block(1, 2, 3, 4, 5, 1, 6, 7, 8, 9, tuple(range(2 * pairs)))
    assert decode_block(encode_block(block, "uu"), "uu") == block


def outcome(read: Callable[[bytes, str], Block], body: bytes) -> Block | None:
    """The block, or None where it is refused."""
    try:
        return read(body, "uu")
    except WireFault:
        return None


@given(st.data())
def test_the_short_way_of_reading_a_block_takes_and_refuses_the_same(data: st.DataObject) -> None:
    """A body with any few characters changed is read or refused alike by the short way and by the grammar."""
    body = bytearray(data.draw(st.sampled_from([GOOD, GOOD + b" x=1", GOOD.replace(b"123", b"0"),
                                                GOOD.replace(b"1230", b"4294967295")])))
    for _ in range(data.draw(st.integers(0, 2))):
        at = data.draw(st.integers(0, len(body) - 1))
        body[at] = data.draw(st.sampled_from(list(b" 0123456789ABCDEFabz+/=-_")))
    assert outcome(decode_block, bytes(body)) == outcome(_decode_any, bytes(body))
