"""Large digits."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.publish.digits import SIZES, best_size, big_lines

NUMBERS = st.text("0123456789-. ", min_size=1, max_size=8)


@given(NUMBERS, st.sampled_from(SIZES), st.booleans())
def test_a_number_takes_the_room_that_was_announced(text: str, size, hatched: bool) -> None:
    """Every line is as wide as ``width`` says, and there are ``rows`` of them."""
    lines = big_lines(text, size, hatched)
    assert len(lines) == size.rows
    assert {len(line) for line in lines} == {size.width(text)}


@given(NUMBERS, st.integers(0, 120), st.integers(0, 20))
def test_the_largest_fitting_size_is_chosen(text: str, width: int, rows: int) -> None:
    """No larger size would have fitted."""
    chosen = best_size(text, width, rows)
    fitting = [size for size in SIZES if size.width(text) <= width and size.rows <= rows]
    assert chosen == (fitting[0] if fitting else None)


@pytest.mark.parametrize("size", SIZES)
def test_no_two_signs_look_alike(size) -> None:
    """Each digit has a picture of its own, hatched or not."""
    for hatched in (False, True):
        pictures = {tuple(big_lines(letter, size, hatched)) for letter in "0123456789-."}
        assert len(pictures) == 12


def test_an_old_number_is_hatched() -> None:
    """The difference between fresh and old needs no colour."""
    fresh, old = (big_lines("8", SIZES[3], hatched) for hatched in (False, True))
    assert "█" in "".join(fresh)
    assert "█" not in "".join(old)
    assert "▒" in "".join(old)
