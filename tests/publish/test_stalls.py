"""The gauge of the loop: what it counts, what it forgives, and that its memory is bounded."""

import asyncio
import math
import time

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.publish.stalls import BUCKETS, PERIOD_S, PIECES_MAX, RECENT_SPAN_S, RECENT_SPANS, Spread, StallGauge


@given(st.lists(st.floats(0.0, 1e4), min_size=1, max_size=300), st.floats(0.001, 1.0))
def test_a_quantile_is_the_true_one_within_a_bucket(values: list[float], share: float) -> None:
    """Nearest rank of the sorted values, read from counts: never below, at most a quarter octave above."""
    spread = Spread()
    for value in values:
        spread.add(value)
    true = sorted(values)[max(0, math.ceil(share * len(values)) - 1)]
    found = spread.quantile(share)
    assert found >= min(true, 268.0) * (1 - 1e-9) or found == spread.longest_s
    assert found <= max(1e-6, true) * 2 ** 0.25 * (1 + 1e-9)
    assert spread.longest_s == max(values)
    assert spread.count == len(values)


def test_an_empty_spread_tells_zero() -> None:
    """Nothing counted, nothing claimed."""
    assert Spread().quantile(0.999) == 0.0


def test_memory_does_not_grow() -> None:
    """However many durations and names: as many buckets, pieces and spans as at the start."""
    gauge = StallGauge(lambda: 0.0)
    for k in range(2 * PIECES_MAX):
        gauge.timed(f"piece {k}", lambda: None)()
    for k in range(1000):
        gauge.beat(k * 100.0, k * 100.0 + 1e-3, 0.0)
    assert len(gauge.pieces) == PIECES_MAX
    assert len(gauge._recent) <= RECENT_SPANS
    assert len(gauge.late._counts) == BUCKETS


def test_a_beat_counts_its_lateness_and_at_most_what_the_process_used() -> None:
    """The own part is the lateness or the processor time, whichever is less; an early beat counts as none."""
    gauge = StallGauge(lambda: 0.0)
    gauge.beat(1.0, 1.08, 0.003)  # the machine did not run us
    assert (gauge.late.longest_s, gauge.own_s) == (pytest.approx(0.08), 0.003)
    gauge.beat(2.0, 2.02, 0.5)  # we were busy, but only so much of it was late
    assert gauge.own_s == pytest.approx(0.02)
    gauge.beat(3.0, 2.9999, 0.0)
    assert gauge.late.count == 3


def test_the_worst_of_the_last_hour_is_forgotten_after_an_hour() -> None:
    """What a lease is held against is recent; the longest since the start stays."""
    gauge = StallGauge(lambda: 0.0)
    gauge.beat(0.0, 0.2, 0.0)
    gauge.beat(10.0, 10.001, 0.0)
    assert gauge.recent_s == pytest.approx(0.2)
    for k in range(1, RECENT_SPANS + 1):
        due_s = k * (RECENT_SPAN_S + 1.0)
        gauge.beat(due_s, due_s + 0.004, 0.0)
    assert gauge.recent_s == pytest.approx(0.004)
    assert gauge.late.longest_s == pytest.approx(0.2)


def test_a_run_has_a_worst_of_its_own() -> None:
    """What stalled before a run was opened is not the run's."""
    gauge = StallGauge(lambda: 0.0)
    gauge.beat(0.0, 0.2, 0.0)
    gauge.run_opened()
    gauge.beat(1.0, 1.003, 0.0)
    note = gauge.note()
    assert note["run_s"] == pytest.approx(0.003)
    assert note["longest_s"] == pytest.approx(0.2)
    assert note["beats"] == 2


def test_pieces_are_timed_by_name_also_where_they_raise() -> None:
    """The longest single callback has a name."""
    gauge = StallGauge(lambda: 0.0)

    def wrong(value: int) -> int:
        raise ValueError(value)

    with pytest.raises(ValueError, match="7"):
        gauge.timed("wrong", wrong)(7)
    assert gauge.timed("right", lambda value: 2 * value)(4) == 8
    assert gauge.pieces["wrong"].count == gauge.pieces["right"].count == 1
    gauge.pieces["wrong"].add(0.5)
    view = gauge.view(0.0)
    assert (view.piece, view.piece_s) == ("wrong", 0.5)


def test_the_picture_changes_once_a_second_at_most() -> None:
    """Watchers are not told of every microsecond."""
    gauge = StallGauge(lambda: 0.0)
    first = gauge.view(10.0)
    gauge.beat(0.0, 0.1, 0.0)
    assert gauge.view(10.5) is first
    assert gauge.view(11.0).longest_s == pytest.approx(0.1)


def test_on_a_loop_it_sees_a_callback_that_holds_it() -> None:
    """A callback that works for five beats: lateness, own part, turn and piece all tell it."""
    gauge = StallGauge()
    held_s = 5 * PERIOD_S

    def work() -> None:
        until_s = time.perf_counter() + held_s
        while time.perf_counter() < until_s:
            pass

    async def scene() -> None:
        gauge.start()
        asyncio.get_running_loop().call_later(2.5 * PERIOD_S, gauge.timed("work", work))
        while gauge.pieces["work"].count == 0 or gauge.late.count < 4:
            await asyncio.sleep(PERIOD_S)
        gauge.stop()
        gauge.stop()

    gauge.timed("work", lambda: None)
    with asyncio.Runner(loop_factory=lambda: asyncio.SelectorEventLoop(gauge.selector())) as runner:
        runner.run(scene())
    assert gauge.late.longest_s >= held_s - PERIOD_S
    assert gauge.turn_s >= held_s
    assert gauge.pieces["work"].longest_s >= held_s
    assert 0.0 < gauge.own_s <= gauge.late.longest_s
    assert gauge.turns.count > 4
