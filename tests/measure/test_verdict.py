"""Pass, fail, not decided."""

from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from hvhost.measure.result import evaluate
from hvhost.measure.uncertainty import Value
from hvhost.measure.verdict import Decision, about_calibration, above, below, level_simple
from hvhost.record.data import load_run
from hvhost.record.entries import Outcome
from tests.measure.making import result_of
from tests.record.making import NO_BREAKDOWN, V_SCALE, Case, made_run, program

PASS, FAIL, OPEN = Decision.PASS, Decision.FAIL, Decision.OPEN


@pytest.mark.parametrize(("value", "decision"), [(9.79, PASS), (9.81, OPEN), (10.0, OPEN), (10.19, OPEN),
                                                 (10.21, FAIL)])
def test_guard_bands_on_an_upper_limit(value: float, decision: Decision) -> None:
    """JCGM 106, 8.3: with U 0.2 and a limit of 10, passed up to 9.8, failed from 10.2, open between."""
    assert below(Value(value, 0.1), 10.0) is decision


@pytest.mark.parametrize(("value", "decision"), [(10.21, PASS), (10.19, OPEN), (9.81, OPEN), (9.79, FAIL)])
def test_guard_bands_on_a_lower_limit(value: float, decision: Decision) -> None:
    """The same from below."""
    assert above(Value(value, 0.1), 10.0) is decision


@pytest.mark.parametrize(("value", "u", "decision"), [(10.0, 0.1, PASS), (9.99, 0.1, FAIL), (10.0, 0.149, PASS),
                                                      (10.0, 0.151, OPEN), (9.0, 0.2, OPEN)])
def test_simple_acceptance_needs_an_uncertainty_of_at_most_three_per_cent(value: float, u: float,
                                                                         decision: Decision) -> None:
    """JCGM 106, 8.2 with IEC 60060-1/-2: the mean itself is compared, but not where U exceeds 3 %."""
    assert level_simple(Value(value, u), 10.0) is decision


def case_with(*acceptance: dict[str, Any], **more: Any) -> Case:
    """A run whose plan asks for these criteria."""
    return Case(**{"meta": {"program": program(list(acceptance))}, **more})


def criterion(kind: str, limit: float, **more: Any) -> dict[str, Any]:
    """One criterion."""
    return {**NO_BREAKDOWN, "kind": kind, "limit": limit, **more}


def test_a_sound_withstand_passes_with_its_rules_stated(tmp_path: Path) -> None:
    """No discharge, applied as asked, specimen seen: pass, each judgement with a rule."""
    result = result_of(tmp_path)
    assert result.verdict is PASS
    assert all(j.rule for j in result.judgements)


def test_a_breakdown_fails(tmp_path: Path) -> None:
    """One disruptive discharge fails the withstand, at the voltage and time that it says."""
    result = result_of(tmp_path, Case(break_at_s=3.0))
    assert result.verdict is FAIL
    assert "1 disruptive discharge, the first at 9.99" in next(j.text for j in result.judgements)


@pytest.mark.parametrize(("changes", "why"), [
    ({"outcome": Outcome.LOWERED}, "run complete"), ({"outcome": Outcome.INTERRUPTED}, "run complete"),
    ({"end": False}, "run complete"), ({"level_v": 9_800.0}, "hold 'withstand'"), ({"hold_s": 3.0}, "hold 'withstand'"),
    ({"farads": 0.0, "ohms": 1e15}, "specimen connected"), ({"lose": 500}, "hold 'withstand'")])
def test_what_is_short_of_a_pass_is_not_decided(tmp_path: Path, changes: dict[str, Any], why: str) -> None:
    """Ended early, interrupted, too low, too short, no specimen, samples missing: never a pass, and it says why."""
    result = result_of(tmp_path, Case(**changes))
    assert result.verdict is OPEN
    assert why in [j.what for j in result.judgements if j.decision is OPEN]


def test_a_coarse_chain_leaves_the_level_open(tmp_path: Path) -> None:
    """With U above 3 % the withstand level is not decided, however well the mean sits."""
    result = result_of(tmp_path, Case(meta={"program": program(), "voltage": replace(V_SCALE, u_gain=0.02)}))
    assert result.verdict is OPEN
    assert any("U is above 3 %" in j.text for j in result.judgements)


def test_a_reason_about_calibration_never_gives_a_plain_pass(tmp_path: Path) -> None:
    """Everything met, but the calibration had expired and somebody gave a reason: not decided, with the name."""
    reason = {"topic": "calibration", "what": "calibration expired", "reason": "recalibration ordered", "by": "A. B."}
    result = result_of(tmp_path, Case(meta={"program": program(), "reasons": (reason,)}))
    assert result.verdict is OPEN
    assert any("recalibration ordered (A. B.)" in j.text for j in result.judgements)
    other = {"topic": "interlock", "what": "x", "reason": "y", "by": "A. B."}
    assert result_of(tmp_path / "b", Case(meta={"program": program(), "reasons": (other,)})).verdict is PASS


def test_reasons_without_a_topic_are_told_by_their_words() -> None:
    """A reason from elsewhere that speaks of calibration counts as one."""
    assert about_calibration({"what": "calibrated: expected a date, found none"})
    assert not about_calibration({"what": "warning shorter than usual"})


@pytest.mark.parametrize(("limit", "decision"), [(12e-6, PASS), (10e-6, OPEN), (8e-6, FAIL)])
def test_leakage_is_judged_with_guard_bands(tmp_path: Path, limit: float, decision: Decision) -> None:
    """10 µA ± 0.4 µA against 12, 10 and 8 µA."""
    assert result_of(tmp_path, case_with(criterion("leakage below", limit))).verdict is decision


@pytest.mark.parametrize(("limit", "decision"), [(0.9e9, PASS), (1.0e9, OPEN), (1.1e9, FAIL)])
def test_resistance_is_judged_with_guard_bands(tmp_path: Path, limit: float, decision: Decision) -> None:
    """1 GΩ ± 4 % against 0.9, 1.0 and 1.1 GΩ."""
    assert result_of(tmp_path, case_with(criterion("resistance above", limit, reading_s=4.0))).verdict is decision


@pytest.mark.parametrize(("limit", "guard", "decision"), [
    (10_000.0, False, PASS), (10_000.0, True, OPEN), (10_030.0, False, FAIL), (9_900.0, True, PASS)])
def test_the_level_has_a_guard_band_only_where_the_plan_asks(tmp_path: Path, limit: float, guard: bool,
                                                            decision: Decision) -> None:
    """10 kV ± 0.06 kV: simple acceptance by default, guard bands on request."""
    asked = criterion("level held", limit, guard_band=guard, tolerance=0.001)
    assert result_of(tmp_path, case_with(asked)).verdict is decision


def test_breakdown_above_judges_each_breakdown(tmp_path: Path) -> None:
    """A discharge at 10 kV is above 9 kV; the run was tripped by what the plan did not want, so it stays open."""
    result = result_of(tmp_path, case_with(criterion("breakdown above", 9_000.0), break_at_s=3.0))
    assert result.judgements[0].decision is PASS
    assert result.verdict is OPEN
    assert result_of(tmp_path / "b", case_with(criterion("breakdown above", 11_000.0), break_at_s=3.0)).verdict is FAIL
    assert result_of(tmp_path / "c", case_with(criterion("breakdown above", 9_000.0))).verdict is OPEN


@pytest.mark.parametrize("acceptance", [[], [criterion("smells good", 1.0)],
                                        [criterion("leakage below", 1.0, hold="x")],
                                        [criterion("resistance above", 1.0, hold="x")],
                                        [criterion("level held", 1.0, hold="x")]])
def test_what_cannot_be_judged_is_not_decided(tmp_path: Path, acceptance: list[dict[str, Any]]) -> None:
    """No criterion, an unknown one, or one about a hold that is not there."""
    assert result_of(tmp_path, case_with(*acceptance, hold_s=1.0)).verdict is OPEN


def test_a_hole_in_the_record_is_no_pass(tmp_path: Path) -> None:
    """One entry lost to a flipped bit: what it held is unknown, so the run does not pass."""
    folder = made_run(tmp_path)
    data = bytearray(folder.blocks.read_bytes())
    data[len(data) // 2] ^= 1
    folder.blocks.write_bytes(data)
    result = evaluate(load_run(folder))
    assert (result.verdict, result.entries_lost) == (OPEN, 1)
