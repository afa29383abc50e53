"""Lines: length, CRC and resynchronisation."""

import random
from zlib import crc32

from hypothesis import given
from hypothesis import strategies as st

from hvhost.wire.lines import LINE_MAX, Garbled, LineReader, seal, unseal

printable = st.text(st.characters(min_codepoint=0x20, max_codepoint=0x7E), min_size=1, max_size=499).map(
    lambda text: text.encode("ascii"))


def test_crc_is_the_published_one() -> None:
    """The CRC-32 of '123456789' is CBF43926 (catalogue of parametrised CRC algorithms, CRC-32/ISO-HDLC, 'check')."""
    assert seal(b"123456789") == b"123456789*009CBF43926\n"


def _bitwise_crc32(data: bytes) -> int:
    register = 0xFFFFFFFF
    for byte in data:
        register ^= byte
        for _ in range(8):
            register = (register >> 1) ^ (0xEDB88320 if register & 1 else 0)
    return register ^ 0xFFFFFFFF


@given(printable)
def test_crc_equals_a_bitwise_twin(body: bytes) -> None:
    """The library's CRC agrees with the polynomial worked bit by bit."""
    assert crc32(body) == _bitwise_crc32(body)


@given(printable)
def test_a_sealed_body_comes_back(body: bytes) -> None:
    """Sealing and unsealing return the body."""
    assert unseal(seal(body)[:-1]) == body


@given(printable, st.data())
def test_any_single_changed_byte_is_noticed(body: bytes, data: st.DataObject) -> None:
    """A line with one byte changed is never taken for a good one."""
    line = bytearray(seal(body)[:-1])
    at = data.draw(st.integers(0, len(line) - 1))
    line[at] = data.draw(st.integers(0, 255).filter(lambda byte: byte not in (line[at], 0x0A)))
    assert isinstance(unseal(bytes(line)), Garbled)


@given(st.lists(st.one_of(st.binary(max_size=60), printable.map(seal)), max_size=12), st.data())
def test_whole_byte_by_byte_and_in_parts_are_the_same(parts: list[bytes], data: st.DataObject) -> None:
    """However a stream is cut into reads, it gives the same bodies and the same dropped lines."""
    stream = b"".join(parts)
    whole = LineReader().feed(stream)
    single, split = LineReader(), LineReader()
    assert [item for k in range(len(stream)) for item in single.feed(stream[k : k + 1])] == whole
    cuts = sorted(data.draw(st.lists(st.integers(0, len(stream)), max_size=5)))
    pieces = [stream[a:b] for a, b in zip([0, *cuts], [*cuts, len(stream)], strict=True)]
    assert [item for piece in pieces for item in split.feed(piece)] == whole


def test_an_endless_line_is_one_dropped_line_and_no_memory() -> None:
    """A megabyte without LF keeps less than a line in memory and is counted once, with its size."""
    reader = LineReader()
    for _ in range(1000):
        assert reader.feed(b"x" * 1000) == []
        assert len(reader._rest) < LINE_MAX
    assert reader.feed(b"\n" + seal(b"cut 1 0")) == [Garbled("too long", 1_000_000), b"cut 1 0"]


def test_the_longest_body_passes_and_one_more_does_not() -> None:
    """A body of 499 bytes makes a line of 512; one byte more is dropped."""
    assert len(seal(b"y" * 499)) == LINE_MAX
    assert LineReader().feed(seal(b"y" * 499)) == [b"y" * 499]
    assert LineReader().feed(seal(b"y" * 500)) == [Garbled("too long", LINE_MAX)]


def test_a_torn_line_in_front_of_a_cut_does_not_swallow_it() -> None:
    """Whatever part of a line precedes it, a cut that begins with LF is read."""
    segment = seal(b"seg 7 C0FFEE01 30000 6000 1000")
    for length in range(len(segment)):
        assert LineReader().feed(segment[:length] + b"\n" + seal(b"cut 1 0"))[-1] == b"cut 1 0"


def test_reasons_are_told() -> None:
    """Each way to be wrong has its reason, and an empty line is nothing."""
    good = seal(b"cut 1 0")[:-1]
    assert LineReader().feed(b"\n\n") == []
    for line, reason in ((b"short", "no trailer"), (good[:-1] + b"g", "trailer not hexadecimal"),
                         (good.lower(), "trailer not hexadecimal"), (b"x" + good, "length"),
                         (b"cut 1 1" + good[7:], "crc"), (seal(b"cut\t1 0")[:-1], "not printable"),
                         (good + b"\r", "no trailer")):
        assert LineReader().feed(line + b"\n") == [Garbled(reason, len(line))]


def test_noise_hardly_ever_passes() -> None:
    """A hundred thousand lines of seeded noise give no body."""
    noise = random.Random(20_240_501).randbytes(2_000_000)
    assert not [item for item in LineReader().feed(noise) if isinstance(item, bytes)]


def test_the_longest_line_may_arrive_without_its_end() -> None:
    """511 bytes still wait for their LF; 512 are already too long."""
    longest = seal(b"y" * 499)
    reader = LineReader()
    assert reader.feed(longest[:-1]) == []
    assert reader.feed(b"\n") == [b"y" * 499]
    assert reader.feed(b"z" * LINE_MAX) == []
    assert reader._rest == b""
    assert reader.feed(b"\n" + longest) == [Garbled("too long", LINE_MAX), b"y" * 499]
