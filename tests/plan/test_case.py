"""What a check looks at."""

from collections.abc import Callable

from hvhost.bench.model import Bench
from hvhost.plan.case import Case, at_place
from hvhost.plan.compiler import compile_plan
from hvhost.plan.passing import History
from hvhost.plan.plan import Plan, RunSheet
from hvhost.words.findings import Grade


def test_load_is_output_cable_and_the_largest_declared_specimen(plan_of: Callable[..., Plan], demo: Bench,
                                                                sheet: Callable[..., RunSheet]) -> None:
    """1 nF, 500 pF, and 2 nF of the sheet's window."""
    plan = plan_of("- ramp: {to: 5 kV, rate: 1 kV/s}")
    typed = sheet("connected: {capacitance: {from: 1 nF, to: 2 nF}}")
    case = Case(plan=plan, sheet=typed, bench=demo, program=compile_plan(plan, typed, demo), history=History(),
                today=None, tick_hz=10_000, queue=16)
    assert round(case.load_f * 1e12) == 3500
    assert len(list(case.energised_steps())) == 1


def test_a_place_is_split_at_its_last_colon() -> None:
    """Windows paths have a colon of their own."""
    finding = at_place(Grade.NOTE, "C:plan.yaml:14", "x", "y", "z")
    assert (finding.file, finding.line) == ("C:plan.yaml", 14)
