"""Criteria of a program: one for each hold that they are judged on."""

from collections.abc import Callable

from hvhost.bench.model import Bench
from hvhost.plan.compiler import compile_plan
from hvhost.plan.criteria import CRITERION_LIMITS
from hvhost.plan.plan import Plan, RunSheet
from hvhost.plan.program import CriterionKind

STEPS = """- ramp: {to: 5 kV, rate: 1 kV/s}
- hold: {name: a, for: 60 s, at_most: 70 s, readings: [30 s, 60 s]}
- ramp: {to: 6 kV, rate: 1 kV/s}
- hold: {name: b, for: 90 s, at_most: 99 s, readings: [60 s], guard_band: yes}"""


def test_a_criterion_without_a_hold_is_judged_on_each(plan_of: Callable[..., Plan], sheet: Callable[..., RunSheet],
                                                      demo: Bench) -> None:
    """'level held' without names takes each hold's own voltage and tolerance."""
    plan = plan_of(STEPS, tail="acceptance:\n- criterion: level held")
    first, second = compile_plan(plan, sheet(), demo).acceptance
    assert (first.hold, first.limit, first.tolerance, first.guard_band) == ("a", 5e3, 0.01, False)
    assert (second.hold, second.limit, second.tolerance, second.guard_band) == ("b", 6e3, 0.03, True)


def test_a_reading_time_picks_the_holds_that_take_it(plan_of: Callable[..., Plan], sheet: Callable[..., RunSheet],
                                                     demo: Bench) -> None:
    """At 30 s only the first hold reads."""
    plan = plan_of(STEPS, tail="acceptance:\n- {criterion: leakage below, limit: 5 µA, at: 30 s}")
    (criterion,) = compile_plan(plan, sheet(), demo).acceptance
    assert (criterion.hold, criterion.reading_s, criterion.limit) == ("a", 30.0, 5e-6)


def test_every_kind_is_in_the_table() -> None:
    """No criterion is without its dimension."""
    assert set(CRITERION_LIMITS) == set(CriterionKind)
