"""Fitting text into cells."""

from hypothesis import given
from hypothesis import strategies as st
from rich.cells import cell_len

from hvhost.publish.folding import cells, joined, wrapped


@given(st.text("ab ", max_size=200), st.integers(4, 40), st.integers(1, 5), st.sampled_from(["", "!! "]))
def test_wrapping_keeps_to_its_room(text: str, width: int, most: int, mark: str) -> None:
    """No more lines than allowed, none wider unless a single word is."""
    lines = wrapped(text, width, most, mark)
    assert 1 <= len(lines) <= most
    longest = max(map(len, text.split()), default=0)
    assert all(len(line) <= max(width, longest + len(mark)) for line in lines)


def test_wrapping_marks_what_it_left_out() -> None:
    """A reader sees that there is more."""
    assert wrapped("one two three four", 8, 1) == ["one two…"]
    assert wrapped("one two", 20, 2, "ok ") == ["ok one two"]


def test_parts_are_broken_between_them() -> None:
    """A part stays whole where it fits; where the parts do not fit that way they are broken at blanks."""
    assert joined(["one two", "three"], " · ", 10, 2) == ["one two", "three"]
    assert joined(["one two", "three"], " · ", 20, 2) == ["one two · three"]
    assert joined(["one two", "three"], ", ", 12, 2, "ok ") == ["ok one two", "   three"]
    assert joined(["one two", "three four"], " · ", 9, 3) == ["one two ·", "three", "four"]


@given(st.lists(st.text("ab ", max_size=20), min_size=1, max_size=9), st.integers(4, 60), st.integers(1, 5))
def test_no_more_lines_than_allowed(parts: list[str], width: int, most: int) -> None:
    """However many parts there are."""
    assert len(joined(parts, " · ", width, most)) <= most


@given(st.text(max_size=40), st.integers(1, 30))
def test_cells_are_exactly_so_many(text: str, width: int) -> None:
    """Wide characters too."""
    assert cell_len(cells(text, width)) == width
