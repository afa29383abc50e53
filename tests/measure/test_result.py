"""Everything that one run tells."""

import json
from pathlib import Path

import pytest

from hvhost.measure.result import evaluate
from hvhost.record.data import load_run
from hvhost.record.folder import RunFolder
from tests.measure.making import result_of
from tests.record.making import OPENED_NS, Case, made_meta


def test_the_result_is_plain_json_with_what_the_catalogue_needs(tmp_path: Path) -> None:
    """Kept beside the record, it needs no program to read."""
    data = json.loads(json.dumps(result_of(tmp_path, Case(break_at_s=3.0)).to_json()))
    assert (data["outcome"], data["verdict"], data["why"]) == ("tripped", "fail", "breakdown")
    assert data["causes"] == ["breakdown"]
    assert data["breakdown_v"] == pytest.approx(10_000.0, abs=8.0)
    assert data["highest_v"] == pytest.approx(10_000.0, abs=15.0)
    assert set(data["holds"][0]["mean"]) == {"value", "u"}


def test_a_run_that_nothing_closed_is_interrupted(tmp_path: Path) -> None:
    """Without END the outcome is interrupted, and the reason says that nothing closed it."""
    result = result_of(tmp_path, Case(end=False))
    assert (result.outcome, result.why) == ("interrupted", "nothing closed this run")


def test_a_run_without_samples_tells_nothing_and_fails_nothing(tmp_path: Path) -> None:
    """An empty run can be evaluated."""
    folder = RunFolder.create(tmp_path, "1", OPENED_NS, made_meta().to_json(), {})
    result = evaluate(load_run(folder))
    assert (result.pairs, result.highest_v, result.time_on_s, result.holds) == (0, 0.0, 0.0, ())
    assert result.verdict == "not decided"
