"""The preflight as a whole: grades, hashes, what may be armed."""

from collections.abc import Callable
from dataclasses import replace
from datetime import date

import pytest

from hvhost.bench.model import Bench
from hvhost.plan.language import load_plan
from hvhost.plan.plan import Plan, RunSheet
from hvhost.plan.preflight import History, calibration_text, preflight, preflight_direct
from hvhost.plan.sheet import load_sheet, sheet_of
from hvhost.words.findings import Finding, Grade
from tests.plan.conftest import CONFIGS

TODAY = date(2026, 12, 1)


@pytest.mark.parametrize("name", ["withstand", "leakage", "stepvoltage", "breakdown", "demo"])
def test_examples_pass_on_the_demonstration_bench(name: str, demo: Bench) -> None:
    """Nothing refuses and nothing needs a reason; only the energy stored at 20 kV and more is worth a note."""
    passed = preflight(load_plan(CONFIGS / f"{name}.plan.yaml"), load_sheet(CONFIGS / f"{name}.sheet.yaml"), demo,
                       history=History(), today=TODAY)
    assert passed.passed
    assert passed.program is not None
    assert [f.what for f in passed.findings] == (["stored energy"] if name in ("demo", "breakdown") else [])


def test_examples_fit_the_small_bench_with_its_own_values(small: Bench) -> None:
    """The withstand plan at 4 kV and negative polarity passes on the small bench."""
    text = (CONFIGS / "withstand.sheet.yaml").read_text(encoding="utf-8")
    from hvhost.plan.sheet import sheet_from

    typed = sheet_from("s.yaml", text.replace("12 kV", "4 kV").replace("positive", "negative")
                       .replace("values:", "values:\n  first_rate: 2 kV/s"))
    result = preflight(load_plan(CONFIGS / "withstand.plan.yaml"), typed, small, history=History(), today=TODAY)
    assert result.passed
    assert result.reasons == ()


def test_four_hashes_say_what_was_looked_at(plan_of: Callable[..., Plan], sheet: Callable[..., RunSheet],
                                            demo: Bench) -> None:
    """Each of plan, sheet, bench and calibration changes its own hash, and the digest with it."""
    plan, typed = plan_of("- ramp: {to: 5 kV, rate: 1 kV/s}"), sheet()
    first = preflight(plan, typed, demo, history=History())
    assert first.hashes["plan"] == plan.sha256
    assert first.hashes["sheet"] == typed.sha256
    assert first.hashes["bench"] == demo.sha256
    changed = {
        "plan": preflight(plan_of("- ramp: {to: 5.0 kV, rate: 1 kV/s}"), typed, demo, history=History()),
        "sheet": preflight(plan, sheet("order: B"), demo, history=History()),
        "bench": preflight(plan, typed, replace(demo, sha256="0" * 64), history=History()),
        "calibration": preflight(plan, typed, _recalibrated(demo), history=History()),
    }
    for name, other in changed.items():
        assert {key for key in first.hashes if first.hashes[key] != other.hashes[key]} == {name}
        assert other.digest != first.digest


def _recalibrated(bench: Bench) -> Bench:
    monitor = replace(bench.voltage.monitor, gain=bench.voltage.monitor.gain * 1.0001)
    return replace(bench, voltage=replace(bench.voltage, monitor=monitor))


def test_the_calibration_is_kept_as_text(demo: Bench) -> None:
    """Every number that turns codes into volts and amps is in the text that is hashed."""
    text = calibration_text(demo)
    assert repr(demo.voltage.monitor.gain) in text
    assert repr(demo.current.program.u_zero) in text


def test_a_refusal_leaves_no_program(plan_of: Callable[..., Plan], sheet: Callable[..., RunSheet],
                                     demo: Bench) -> None:
    """Nothing that was refused can be armed, reason or not."""
    result = preflight(plan_of("- ramp: {to: 24.5 kV, rate: 1 kV/s}"), sheet(), demo, history=History())
    assert not result.passed
    assert result.program is None
    assert result.findings[0].grade is Grade.REFUSE


def test_what_the_bench_file_asked_a_reason_for_is_carried(plan_of: Callable[..., Plan],
                                                           sheet: Callable[..., RunSheet], demo: Bench) -> None:
    """A finding of the bench stands in every preflight on it."""
    asks = Finding(grade=Grade.REASON, file="b.yaml", line=3, what="ground.device", expected="stick or switch",
                   found="none")
    result = preflight(plan_of("- ramp: {to: 5 kV, rate: 1 kV/s}"), sheet(), replace(demo, findings=(asks,)),
                       history=History())
    assert result.passed
    assert result.reasons == (asks,)


def test_a_fault_that_a_repeat_unrolls_is_told_once(plan_of: Callable[..., Plan], sheet: Callable[..., RunSheet],
                                                    demo: Bench) -> None:
    """Fifty rounds above the ceiling are one finding at one line."""
    plan = plan_of("- repeat:\n    times: 50\n    steps:\n      - ramp: {to: 25 kV, rate: 1 kV/s}\n      - rest: 1 s")
    findings = preflight(plan, sheet(), demo, history=History()).findings
    assert [f.what for f in findings if f.grade is Grade.REFUSE] == ["ramp 1"]


def test_a_specimen_alone_is_enough_to_ask(plan_of: Callable[..., Plan], demo: Bench) -> None:
    """A run asked for by specimen and operator passes, and says that it can prove no specimen."""
    plan = plan_of("- ramp: {to: 5 kV, rate: 1 kV/s}", tail="acceptance: [{criterion: no breakdown}]")
    result = preflight(plan, sheet_of("S-9", operator="tester"), demo, history=History(), today=TODAY)
    assert result.passed
    assert result.reasons == ()
    assert [f.what for f in result.findings] == ["connected"]


def test_a_direct_run_is_judged_by_the_bench_alone(demo: Bench) -> None:
    """Its preflight has the implicit plan, four hashes, and the calibration's date."""
    result = preflight_direct(demo, sheet_of("S-9", operator="tester"), today=TODAY)
    assert result.passed
    assert set(result.hashes) == {"plan", "sheet", "bench", "calibration"}
    expired = replace(demo, calibration_valid_until=date(2026, 11, 30))
    (reason,) = preflight_direct(expired, sheet_of("S-9", operator="tester"), today=TODAY).reasons
    assert reason.what == "calibration.valid_until"
