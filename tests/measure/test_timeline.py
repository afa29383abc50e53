"""Steps as stretches of rows."""

from pathlib import Path

import pytest

from hvhost.measure.timeline import last_live_row, spans_of, steps_of, time_on_s
from tests.measure.making import data_of
from tests.record.making import Case


def test_steps_begin_and_end_where_they_were_noted(tmp_path: Path) -> None:
    """Ramp and hold are found with their rows, their clock and their program's values."""
    ramp, hold = spans_of(data_of(tmp_path))
    assert (ramp.kind, ramp.begin, ramp.end, ramp.complete) == ("ramp", 320, 5320, True)
    assert (hold.kind, hold.begin, hold.clock, hold.end) == ("hold", 5320, 5832, 10_120)
    assert hold.number_of("hold_s") == 4.0
    assert hold.number_of("name", 9.0) == 9.0


def test_a_step_that_never_ended_reaches_to_the_fall(tmp_path: Path) -> None:
    """A hold that a breakdown ended stops where the voltage began to fall, else with the last energised sample."""
    run = data_of(tmp_path, Case(break_at_s=3.0))
    assert spans_of(run, falls=(8320,))[1].end == 8320
    assert spans_of(run)[1].end == last_live_row(run) >= 8320
    assert not spans_of(run)[1].complete


def test_time_on_is_from_the_energised_event_to_the_cut(tmp_path: Path) -> None:
    """A ramp of 5 s, a hold of 4.8 s and a lower of 0.96 s."""
    assert time_on_s(data_of(tmp_path)) == pytest.approx(5.0 + 4.8 + 0.96, abs=0.005)


def test_a_run_without_a_program_has_no_steps(tmp_path: Path) -> None:
    """A direct run is measured without a table of steps."""
    assert steps_of(data_of(tmp_path, Case(hold_s=0.6, meta={"program": None}))) == {}
