"""The queue of requests: numbers, repeats, giving up."""

import pytest

from hvhost.wire.frames import Again, Arm, Info, Ok, Refusal, Segment, decode_request
from hvhost.wire.lines import LineReader
from hvhost.wire.requests import ANSWER_S, QUEUE_MAX, TRIES, Requests
from hvhost.words.errors import CommandRefused

SEGMENT = Segment(v=1, i=2, ticks=3)
ARM = Arm(arm=1, tag=2, settings=3, event=4)


def sent(data: bytes) -> list[tuple[str, int]]:
    """Return verb and number of each request in these bytes."""
    bodies = [body for body in LineReader().feed(data) if isinstance(body, bytes)]
    return [(type(decode_request(body)).__name__, decode_request(body).n) for body in bodies]  # type: ignore[union-attr]


def test_one_is_outstanding_at_a_time() -> None:
    """The second leaves only when the first is answered, with the next number."""
    requests = Requests(7)
    requests.add(1, Info(page=0))
    requests.add(2, Info(page=1))
    assert sent(requests.due(0.0)) == [("Info", 1)]
    assert requests.due(0.0) == b""
    done = requests.answer(Ok(n=1, verb="info"))
    assert done is not None
    assert done.ticket == 1
    assert sent(requests.due(0.0)) == [("Info", 2)]


def test_a_repeat_has_the_same_bytes_and_the_tries_are_bounded() -> None:
    """Unanswered, it leaves four times in all, then is given up."""
    requests = Requests(7)
    requests.add(1, Info(page=0))
    first = requests.due(0.0)
    lines = [requests.due(k * ANSWER_S) for k in range(1, 10)]
    assert lines == [first] * (TRIES - 1) + [b""] * (10 - TRIES)
    assert requests.expired(ANSWER_S * TRIES - 0.01) is None
    gone = requests.expired(ANSWER_S * TRIES)
    assert gone is not None
    assert gone.ticket == 1


def test_after_giving_up_the_higher_number_is_tried_first() -> None:
    """Whether or not the lost request took its number, the next one finds its own and is never a repeat."""
    for taken in (True, False):
        requests = Requests(7)
        requests.add(1, SEGMENT)
        requests.due(0.0)
        assert [one.ticket for one in requests.drop(all_of_them=False)] == [1]
        requests.add(2, Info(page=3))
        assert sent(requests.due(0.1)) == [("Info", 2)]
        if taken:
            assert requests.answer(Ok(n=2, verb="info")) is not None
            following = 3
        else:
            assert requests.answer(Refusal(n=2, verb="info", code="number")) is None
            assert sent(requests.due(0.1)) == [("Info", 1)]
            assert requests.expected(Refusal(n=2, verb="info", code="number"))
            assert requests.answer(Ok(n=1, verb="info")) is not None
            following = 2
        requests.add(3, Info(page=0))
        assert sent(requests.due(0.2)) == [("Info", following)]


def test_a_number_that_may_be_free_is_tried_second() -> None:
    """After an answer that does not take the number, the next request still finds the right one."""
    requests = Requests(7)
    requests.add(1, Info(page=99))
    requests.due(0.0)
    assert requests.answer(Refusal(n=1, verb="info", code="range")) is not None
    requests.add(2, Info(page=0))
    assert sent(requests.due(0.0)) == [("Info", 2)]
    assert requests.answer(Refusal(n=2, verb="info", code="number")) is None
    assert sent(requests.due(0.0)) == [("Info", 1)]


def test_a_number_refused_without_doubt_is_told() -> None:
    """Where nothing was given up, 'number' is an answer like another: the session is out of step."""
    requests = Requests(7)
    requests.add(1, Info(page=0))
    requests.due(0.0)
    assert requests.answer(Refusal(n=1, verb="info", code="number")) is not None


def test_answers_that_fit_nothing() -> None:
    """Another number or verb answers nothing; a repeat of the last answer is expected, an invention is not."""
    requests = Requests(7)
    requests.add(1, Info(page=0))
    assert requests.answer(Ok(n=1, verb="info")) is None
    requests.due(0.0)
    assert requests.answer(Ok(n=2, verb="info")) is None
    assert requests.answer(Ok(n=1, verb="get")) is None
    assert requests.answer(Ok(n=1, verb="inf")) is None
    assert not requests.expected(Ok(n=5, verb="info"))
    assert not requests.expected(Ok(n=2, verb="info"))
    assert requests.answer(Ok(n=1, verb="info")) is not None
    assert requests.expected(Ok(n=1, verb="info"))
    assert not requests.expected(Ok(n=1, verb="get"))


def test_drop_takes_arms_and_segments_only_or_everything() -> None:
    """A stop takes out arms and segments, sent or waiting; the rest keeps its order."""
    requests = Requests(7)
    for ticket, frame in enumerate((ARM, Again(event=1), SEGMENT, Info(page=0)), start=1):
        requests.add(ticket, frame)
    requests.due(0.0)
    gone = requests.drop(all_of_them=False)
    assert [(one.ticket, one.sent) for one in gone] == [(1, True), (3, False)]
    assert sent(requests.due(0.0)) == [("Again", 2)]
    assert [one.ticket for one in requests.drop(all_of_them=True)] == [2, 4]
    assert requests.due(9.0) == b""
    assert requests.deadline(9.0) is None


def test_the_queue_is_bounded() -> None:
    """One more than the bound is refused with what to do."""
    requests = Requests(7)
    for ticket in range(QUEUE_MAX):
        requests.add(ticket, SEGMENT)
    with pytest.raises(CommandRefused, match="wait for answers"):
        requests.add(99, SEGMENT)


def test_the_deadline_is_when_something_is_due() -> None:
    """At once for what has not left, then when the repeat is due."""
    requests = Requests(7)
    assert requests.deadline(1.0) is None
    requests.add(1, SEGMENT)
    assert requests.deadline(1.0) == 1.0
    requests.due(1.0)
    assert requests.deadline(1.0) == 1.0 + ANSWER_S
