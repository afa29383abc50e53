"""Large words."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.publish.letters import SCALES, large_words, rows_of, width_of
from hvhost.publish.snapshot import Permission, Phase

DRAWABLE = "ABCDEFGHIJKLMNOPQRSTUVWXYZabc0123456789-.:,/_+()# "


@given(st.text(max_size=20), st.integers(0, 200), st.integers(0, 14))
def test_a_word_stays_in_its_room(text: str, width: int, rows: int) -> None:
    """Whatever is asked for, no line is wider and none is more; a word that does not fit is not drawn at all."""
    lines = large_words(text, width, rows)
    assert len(lines) <= rows
    assert all(len(line) <= width for line in lines)


@given(st.text(DRAWABLE, min_size=1, max_size=12), st.sampled_from(SCALES))
def test_a_word_takes_the_room_that_was_announced(text: str, scale: int) -> None:
    """Width and rows are known before; the largest scale that fits is taken."""
    width = width_of(text, scale)
    assert width is not None
    lines = large_words(text, width, rows_of(scale))
    assert {len(line) for line in lines} == {width}
    assert len(lines) == rows_of(scale)


def test_no_two_signs_look_alike() -> None:
    """Each letter and digit has a picture of its own; 0 and O too, since specimens are named with both."""
    signs = "ABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789-.:,/_+()#"
    pictures = [tuple(large_words(sign, 20, 4)) for sign in signs]
    assert len(set(pictures)) == len(signs)


@pytest.mark.parametrize("state", [str(one) for one in Permission] + [f"running: {one}" for one in Phase if one])
def test_every_state_fits_a_small_terminal(state: str) -> None:
    """The state's word is drawn large at 80 columns, of a long one the phase alone."""
    assert large_words(state, 78, 4) or large_words(state.removeprefix("running: "), 78, 4)


def test_a_sign_without_a_picture_is_not_guessed() -> None:
    """A word with other letters is left to ordinary text."""
    assert large_words("Ö1", 200, 10) == []
    assert large_words("", 200, 10) == []
