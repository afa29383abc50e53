"""The page of a run."""

from pathlib import Path

import pytest

from hvhost.measure.result import evaluate
from hvhost.measure.uncertainty import Value
from hvhost.record.data import load_run
from hvhost.record.manifest import Check
from hvhost.report.page import WIDTH, page, shown
from tests.record.making import Case, made_meta, made_run, program


def page_for(tmp_path: Path, case: Case | None = None) -> str:
    """The page of a made run."""
    run = load_run(made_run(tmp_path, case))
    return page(run.meta, evaluate(run))


SECTIONS = ("Verdict and its rules", "Applied", "Leaked", "Arced", "Stopped", "Cautions", "Record")


def test_a_page_tells_the_story_in_order_within_eighty_columns(tmp_path: Path) -> None:
    """What was applied, what leaked, whether it arced, why it stopped: each has its place."""
    text = page_for(tmp_path)
    places = [text.index(f"\n{title}\n") for title in SECTIONS]
    assert places == sorted(places)
    assert max(len(line) for line in text.splitlines()) <= WIDTH
    assert text.startswith("Run 0007: PASS\n")
    assert "mean -10.000 kV ± 0.061 kV" in text
    assert "no disruptive discharge" in text


def test_a_breakdown_stands_on_the_page_with_voltage_time_and_stop(tmp_path: Path) -> None:
    """Where, when, seen by whom, how fast the output was stopped, and that nobody has looked yet."""
    text = " ".join(page_for(tmp_path, Case(break_at_s=3.0)).split())
    assert "Run 0007: FAIL" in text
    assert "seen by MCU and host, stopped at most 3.2 ms after it began; kind not inspected" in text
    assert "latched breakdown" in text


def test_no_page_ever_says_that_it_is_safe(tmp_path: Path) -> None:
    """S6: the caution is there, and the word is not."""
    for case in (Case(hold_s=1.0), Case(break_at_s=0.8), Case(hold_s=1.0, end=False)):
        text = page_for(tmp_path / str(id(case)), case)
        assert "Before touching: switch off, secure against reconnection" in text
        assert "safe" not in text.lower()


def test_cautions_name_what_the_bench_lacks_and_every_reason(tmp_path: Path) -> None:
    """No arm input, programming only, measured elsewhere, under a reason: all stand on the page."""
    bench = {"programming_only": True, "arm_input": False, "monitor_at_specimen": False}
    reasons = ({"what": "calibration expired", "reason": "ordered", "by": "A. B.", "topic": "calibration"},)
    text = " ".join(page_for(tmp_path, Case(hold_s=0.6, meta={"bench": bench, "reasons": reasons,
                                                              "program": program()})).split())
    for words in ("programmed to zero, supply still powered", "No arm input: no press is asked for",
                  "not measured at the specimen", "calibration expired: ordered (A. B.)"):
        assert words in text


def test_cautions_name_a_supply_that_stays_powered_and_a_monitor_that_does_not(tmp_path: Path) -> None:
    """Inhibit alone, wiring that does not inhibit without the MCU, a blind monitor: the page says each."""
    bench = {"supply_stays_powered": True, "inhibits_without_mcu": False, "monitor_powered_after_cut": False}
    text = " ".join(page_for(tmp_path, Case(hold_s=0.6, meta={"bench": bench, "program": program()})).split())
    for words in ("inhibited, supply still powered", "does not inhibit when the MCU is absent or in reset",
                  "monitor has no power: the discharge was not measured here"):
        assert words in text


def test_faults_of_the_folder_and_damages_are_said(tmp_path: Path) -> None:
    """A changed file and a torn record are on the page, not behind it."""
    run = load_run(made_run(tmp_path, Case(hold_s=0.6)))
    text = page(run.meta, evaluate(run), Check(closed=True, faults=("run.hvb: changed since the close",)),
                ({"number": 1, "kind": "inspection", "utc_ns": 0},), ("torn at byte 5: x",))
    for words in ("NOT AS CLOSED", "run.hvb: changed since the close", "torn at byte 5: x", "inspection, 1970-01-01"):
        assert words in text


@pytest.mark.parametrize(("value", "u", "text"), [(12_345.678, 15.0, "12.346 kV ± 0.030 kV"),
                                                  (12_345.678, 150.0, "12.35 kV ± 0.30 kV"),
                                                  (12_345.678, 9_000.0, "12 kV ± 18 kV"), (1.0, 0.0, "0.001 kV")])
def test_values_are_shown_to_the_place_of_their_uncertainty(value: float, u: float, text: str) -> None:
    """Two figures of U, the value to the same place (common practice, JCGM 100, 7.2.6)."""
    assert shown(Value(value, u), "kV", 1e-3) == text


def test_the_environment_is_shown_where_it_was_entered(tmp_path: Path) -> None:
    """Temperature, humidity and pressure of the run sheet."""
    run = load_run(made_run(tmp_path, Case(hold_s=0.6)))
    sheet = {"specimen": "S", "environment": {"temperature_c": 21.0, "humidity": 0.4, "pressure_pa": None}}
    assert "21.0 °C, 40 % relative humidity" in page(made_meta(sheet=sheet), evaluate(run))
