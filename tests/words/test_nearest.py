"""The nearest right word."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.words.nearest import nearest_word

WORDS = ("voltage", "current", "arc_rest", "latches_open", "none")


@pytest.mark.parametrize(("word", "near"), [
    ("volage", "voltage"), ("Voltage", "voltage"), ("arc rest", "arc_rest"), ("ARC-REST", "arc_rest"),
    ("latchs_open", "latches_open"), ("curent", "current"), ("colour", ""), ("", ""), ("x", "")])
def test_nearest(word: str, near: str) -> None:
    """Typing errors, case and separators find their word; what is far from all finds none."""
    assert nearest_word(word, WORDS) == near


def test_nothing_known() -> None:
    """Without known words there is no nearest one."""
    assert nearest_word("voltage", ()) == ""


@given(st.text(max_size=3000))
def test_any_word(word: str) -> None:
    """Any text gives a known word or none, and long ones cost no time."""
    assert nearest_word(word, WORDS) in (*WORDS, "")
