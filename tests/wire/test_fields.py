"""The kinds of field, read strictly."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.wire.fields import CODE, FLAG, HEX8, NUMBER, SIGNED, VALUE, WORD, Kind
from hvhost.words.errors import WireFault

RANGES = ((NUMBER, 0, 0xFFFFFFFF), (SIGNED, -0x80000000, 0x7FFFFFFF), (CODE, 0, 65535), (FLAG, 0, 1),
          (VALUE, -0xFFFFFFFF, 0xFFFFFFFF), (HEX8, 0, 0xFFFFFFFF))


@pytest.mark.parametrize(("kind", "low", "high"), RANGES)
def test_a_number_comes_back_and_its_neighbours_do_not(kind: Kind, low: int, high: int) -> None:
    """Both ends of a range are read as they were written; beyond them nothing is."""
    read, write = kind
    assert read(write(low)) == low
    assert read(write(high)) == high
    for beyond in (low - 1, high + 1):
        with pytest.raises(WireFault):
            read(write(beyond))


@given(st.text(max_size=12))
def test_any_text_is_a_number_in_range_or_a_fault(text: str) -> None:
    """No reader returns anything for a text that it would not itself write."""
    for read, write in (NUMBER, SIGNED, CODE, FLAG, VALUE, HEX8, WORD):
        try:
            value = read(text)
        except WireFault:
            continue
        assert write(value) == text


@pytest.mark.parametrize("text", ["", "-", "+1", "01", "-0", "1.0", "1e3", "0x1", "1_0", " 1", "1 ", "٣", "１"])
def test_numbers_in_disguise_are_refused(text: str) -> None:
    """Signs, leading zeros, exponents, underscores, spaces and other scripts' digits are no numbers here."""
    for read, _ in (NUMBER, SIGNED):
        with pytest.raises(WireFault):
            read(text)
