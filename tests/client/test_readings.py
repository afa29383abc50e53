"""Blocks of readings: arrays, times, and what is no reading."""

from typing import Any

import numpy as np
import pytest

from hvhost.client.readings import Readings, Span, readings_in, still_s
from hvhost.publish.readings import Backlog, ReadingsFeed
from hvhost.words.errors import CannotConnect, CommandRefused
from tests.publish.test_readings import FIGURES, block, lines


def sent(every: int, first: int, pairs: int) -> dict[str, Any]:
    """A notification as a daemon sends it."""
    feed, backlog = ReadingsFeed(lambda: FIGURES), Backlog(every)
    feed.add(backlog)
    feed.take(block(first, list(range(pairs))))
    feed.spread()
    return {"jsonrpc": "2.0", "method": "readings", "params": lines(backlog)[0]}


def test_every_sample_has_its_index_time_and_value() -> None:
    """Least and greatest value of one sample are itself."""
    got = readings_in(sent(1, 320, 4))
    assert got is not None
    assert got.indices.tolist() == [320, 321, 322, 323]
    assert got.volts.tolist() == got.volts_max.tolist() == [1.0, 1.5, 2.0, 2.5]
    assert got.volts.dtype == np.float32
    assert got.t_s.tolist() == pytest.approx([0.32, 0.321, 0.322, 0.323])
    assert np.diff(got.t).astype(int).tolist() == [1_000_000] * 3
    assert (len(got), got.last_index, got.dropped, got.missing, got.flags) == (4, 323, 0, 0, ())


def test_stretches_begin_at_multiples_but_for_the_first() -> None:
    """A block that begins within a stretch says so by its first index."""
    got = readings_in(sent(4, 6, 10))
    assert got is not None
    assert got.indices.tolist() == [6, 8, 12]
    assert (got.t[1] - got.t[0]).astype(int) == 2_000_000
    assert ((got.volts_min <= got.volts) & (got.volts <= got.volts_max)).all()


@pytest.mark.parametrize("change", [{"volts": "!"}, {"volts": "AAAA"}, {"points": 0}, {"points": 3}, {"index": "x"},
                                    {"flags": None}, {"utc_ns": None}])
def test_a_reading_of_another_form_is_a_sentence(change: dict[str, Any]) -> None:
    """Nothing that a strange daemon sends becomes a wrong number."""
    message = sent(1, 0, 2)
    message["params"] |= change
    with pytest.raises(CannotConnect, match="another form"):
        readings_in(message)


def test_what_is_no_reading_is_passed_over() -> None:
    """Snapshots, answers and silence."""
    for message in (None, {"id": 1, "result": 2}, {"method": "snapshot", "params": {}}, []):
        assert readings_in(message) is None


def test_a_span_ends_by_the_board_s_own_time() -> None:
    """So many seconds of samples, whatever the host's clock does."""
    span = Span(1, 0.1)
    blocks = [readings_in(sent(1, first, 32)) for first in range(0, 160, 32)]
    assert [span.over(b) for b in blocks if isinstance(b, Readings)] == [False, False, False, True, True]
    assert not Span(1, None).over(blocks[0])  # type: ignore[arg-type]
    assert still_s(1000) == 15.0


@pytest.mark.parametrize(("every", "seconds"), [(0, None), (1.5, None), (True, None), (10**6, None), (1, 0.0),
                                                (1, float("nan")), (1, -1.0)])
def test_what_nobody_can_read_is_refused(every: Any, seconds: float | None) -> None:
    """Before a connection is made."""
    with pytest.raises(CommandRefused):
        Span(every, seconds)
