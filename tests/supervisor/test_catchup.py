"""The count of the MCU's events without gaps, or with its gaps known."""

from hypothesis import given
from hypothesis import strategies as st

from hvhost.supervisor.catchup import KEPT, TRIES, EventBook


def test_events_in_order_are_news_and_repeats_are_not() -> None:
    """Each number once."""
    book = EventBook()
    book.restart(3)
    assert book.heard(4) == (True, False)
    assert book.heard(4) == (False, False)
    assert book.wanted() is None


def test_a_gap_is_asked_for_and_what_comes_is_late_news() -> None:
    """5 and 6 are missing behind 7; told again they are news, and late."""
    book = EventBook()
    book.restart(4)
    assert book.heard(7) == (True, False)
    assert book.wanted() == 5
    book.asked()
    assert book.wanted() is None
    assert book.heard(5) == (True, True)
    book.done()
    assert book.settle() == []
    assert book.wanted() == 6
    assert book.heard(6) == (True, True)
    assert book.wanted() is None


def test_a_block_tells_of_an_event_that_never_came() -> None:
    """Its number is known from the block, so the event itself is missing."""
    book = EventBook()
    book.restart(4)
    book.told(5)
    assert book.missing == {5}
    assert book.last == 5


def test_what_is_gone_is_told_once() -> None:
    """After the last try, or at once where the MCU says that it keeps them no longer."""
    book = EventBook()
    book.restart(0)
    book.told(2)
    for _ in range(TRIES):
        assert book.settle() == []
        assert book.wanted() == 1
        book.asked()
        book.done()
    assert book.settle() == [1, 2]
    assert book.settle() == []
    book.told(4)
    book.asked()
    book.done(gone=True)
    assert book.settle() == [3, 4]


@given(st.lists(st.integers(0, 2**32 - 1), max_size=30))
def test_memory_is_bounded_whatever_numbers_come(numbers: list[int]) -> None:
    """A device that counts wildly fills nothing, and is asked for what it can still have."""
    book = EventBook()
    for number in numbers:
        book.heard(number)
        book.told(number // 2)
        assert len(book.missing) <= 31 * 4 * (KEPT + 1)
        wanted = book.wanted()
        assert wanted is None or 1 <= wanted <= book.last
