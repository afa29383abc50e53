"""From plan, sheet and bench to a program."""

from collections.abc import Callable

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.bench.file import load_bench
from hvhost.bench.model import Bench
from hvhost.plan.compiler import compile_plan, compiled, direct_program, filled, segments_for, shown_duration
from hvhost.plan.language import load_plan, read_plan
from hvhost.plan.plan import Plan, RunSheet
from hvhost.plan.program import HoldStep, RampStep, RestStep
from hvhost.plan.sheet import load_sheet, sheet_from
from hvhost.words.errors import FileFault
from tests.plan.conftest import CONFIGS
from tests.plan.test_segments import judge

HEAD = "parameters:\n  u: {quantity: voltage, from: 1 kV, to: 20 kV}\n  t: {quantity: duration, from: 1 s, to: 90 s, " \
       "default: 60 s}"
STEPS = "- ramp: {to: 75 % of u, rate: 1 kV/s}\n- ramp: {to: u, rate: 2 %/s of u}\n- hold: {for: t, at_most: 2 min}"


def test_parameters_are_filled_from_the_sheet(plan_of: Callable[..., Plan], sheet: Callable[..., RunSheet],
                                              demo: Bench) -> None:
    """The sheet's value, or the plan's default where it gives none; shares follow."""
    program = compile_plan(plan_of(STEPS, HEAD), sheet("values: {u: 8 kV}"), demo)
    first, second, hold = program.steps
    assert isinstance(first, RampStep)
    assert isinstance(second, RampStep)
    assert isinstance(hold, HoldStep)
    assert (first.to_v, second.to_v, second.slew_v_per_s) == (6e3, 8e3, pytest.approx(160.0))
    assert second.duration_s == pytest.approx(12.5)  # the last quarter at 2 %/s (IEC 60060-1 raising, from memory)
    assert (hold.v, hold.hold_s, hold.tolerance, hold.limit_a) == (8e3, 60.0, 0.01, demo.i_max)
    assert program.v_highest == 8e3


@pytest.mark.parametrize(("more", "what", "expected", "found"), [
    ("", "values", "a value for 'u', 1 kV to 20 kV", "nothing"),
    ("values: {u: 21 kV}", "values.u", "1 kV to 20 kV", "'21 kV'"),
    ("values: {u: 8 mA}", "values.u", "a voltage such as '25 kV'", "'8 mA'"),
    ("values: {u: 8 kV, tt: 9 s}", "values.tt", "a parameter of the plan (u, t)", "'tt'"),
])
def test_what_the_sheet_lacks_or_exceeds_is_told_in_the_sheet(more: str, what: str, expected: str, found: str,
                                                              plan_of: Callable[..., Plan],
                                                              sheet: Callable[..., RunSheet], demo: Bench) -> None:
    """A missing, outlying, mistaken or unknown value names the sheet's line."""
    plan, typed = plan_of(STEPS, HEAD), sheet(more)
    (finding,) = filled(plan, typed)[1]
    assert (finding.file, finding.what, finding.expected, finding.found) == ("sheet.yaml", what, expected, found)
    assert finding.line == (5 if more else 1)
    with pytest.raises(FileFault, match=r"sheet\.yaml"):
        compile_plan(plan, typed, demo)


def test_a_value_that_breaks_the_plan_is_told_at_the_plans_line(plan_of: Callable[..., Plan],
                                                                sheet: Callable[..., RunSheet], demo: Bench) -> None:
    """A reading at 60 s in a hold of 30 s."""
    plan = plan_of("- ramp: {to: 5 kV, rate: 1 kV/s}\n- hold: {for: t, at_most: 2 min, readings: [60 s]}",
                   "parameters: {t: {quantity: duration, from: 30 s, to: 90 s}}")
    program, (finding,) = compiled(plan, sheet("values: {t: 30 s}"), demo)
    assert program is None
    assert (finding.file, finding.line, finding.found) == ("test.yaml", 6, "60 s")
    assert compiled(plan, sheet("values: {t: 60 s}"), demo)[0] is not None


def test_duration_counts_the_longest_course(plan_of: Callable[..., Plan], sheet: Callable[..., RunSheet],
                                            demo: Bench) -> None:
    """5 s up, 70 s at most, then 1 s down at 5 kV/s."""
    plan = plan_of("- ramp: {to: 5 kV, rate: 1 kV/s}\n- hold: {for: 60 s, at_most: 70 s}")
    program = compile_plan(plan, sheet(), demo)
    assert program.duration_s == pytest.approx(5 + 70 + 1)


def test_duration_counts_every_retreat() -> None:
    """Up, four times rest, climb and up again, a last rest: for each ramp at its top; then the way down."""
    program = compile_plan(load_plan(CONFIGS / "breakdown.plan.yaml"), load_sheet(CONFIGS / "breakdown.sheet.yaml"),
                           load_bench(CONFIGS / "demo.bench.yaml"))
    first = 1.25 + 4 * (8 + 1 + 0.75) + 8  # 5 kV at 4 kV/s; back to 2 kV at 2 kV/s
    second = 30 + 4 * (8 + 4 + 24) + 8  # 5 to 20 kV at 500 V/s; back to 8 kV at 2 kV/s
    assert program.duration_s == pytest.approx(first + second + 4)
    assert program.retreat is not None
    assert program.retreat.target(10e3) == pytest.approx(4e3)


def test_compiling_is_pure(demo: Bench) -> None:
    """The same plan, sheet and bench give an equal program."""
    plan, typed = load_plan(CONFIGS / "stepvoltage.plan.yaml"), load_sheet(CONFIGS / "stepvoltage.sheet.yaml")
    assert compile_plan(plan, typed, demo) == compile_plan(plan, typed, demo)


def test_a_retreat_that_would_miss_the_pause_is_refused_with_its_values(plan_of: Callable[..., Plan],
                                                                        sheet: Callable[..., RunSheet],
                                                                        demo: Bench) -> None:
    """Parameters decide when the pause expires, so the compiler judges them."""
    plan = plan_of("- ramp: {to: 5 kV, rate: 1 kV/s, until: breakdown}",
                   "specimen: self-restoring\nparameters: {r: {quantity: duration, from: 1 s, to: 5 min}}\n"
                   "arc: {reaction: pause, count: 5, rest: 2 s, window: 2 min}\n"
                   "retreat: {rest: r, back: 20 %, series: 2}")
    assert compiled(plan, sheet("values: {r: 10 s}"), demo)[0] is not None
    for rest in ("1 s", "60 s"):
        program, (finding,) = compiled(plan, sheet(f"values: {{r: {rest}}}"), demo)
        assert program is None
        assert finding.expected.startswith("from 2 s")


def test_a_direct_run_has_the_benchs_ceilings(demo: Bench) -> None:
    """The implicit plan: no steps, no reaction, as long as the bench allows."""
    program = direct_program(demo)
    assert (program.kind, program.steps, program.reaction) == ("direct", (), None)
    assert (program.v_highest, program.i_highest, program.duration_s) == (24e3, 4e-3, 4 * 3600.0)


@pytest.mark.parametrize(("seconds", "text"), [(75.0, "75 s"), (180.0, "3 min 00 s"), (4000.0, "1 h 06 min 40 s")])
def test_long_durations_are_written_as_clocks_show_them(seconds: float, text: str) -> None:
    """Nobody reads 4000 s as an hour and more."""
    assert shown_duration(seconds) == text


DEMO = load_bench(CONFIGS / "demo.bench.yaml")
VOLTS, RATES = st.integers(1, 24_000), st.integers(1, 5_000)
LINES = st.one_of(
    st.builds("- ramp: {{to: {} V, rate: {} V/s}}".format, VOLTS, RATES),
    st.builds("- ramp: {{to: {} V, duration: {} s, current_limit: {} µA}}".format, VOLTS, st.integers(5, 9),
              st.integers(1, 4_000)),
    st.builds("- rest: {} s".format, st.integers(1, 9)),
    st.builds("- staircase: {{from: {0} V, to: {1} V, step: 700 V, for: 2 s, at_most: 3 s}}".format,
              st.integers(1, 11_999), st.integers(12_000, 24_000)),
    st.just("- hold: {for: 2 s, at_most: 3 s}"))


@given(st.lists(LINES, min_size=1, max_size=6))
def test_the_mcu_would_take_every_segment_of_every_plan(lines: list[str]) -> None:
    """Whatever plan passes, from zero to its end: no ceiling broken, each step ends at its words, times add up."""
    plan, _ = read_plan("p.yaml", "plan: x\nsteps:\n" + "\n".join(lines) + "\n")
    if plan is None:
        return  # a hold at nothing, a ramp that goes nowhere: refused with a finding
    program, _ = compiled(plan, sheet_from("s.yaml", "sheet: x\nspecimen: S-1\n"), DEMO)
    assert program is not None
    v = i = 0
    for step in program.steps:
        segments = segments_for(step, v, i, DEMO, 10_000)
        judge(segments, v, i, DEMO, 10_000)
        moving = sum(segment.ticks for before, segment in zip([v, *(s.v for s in segments)], segments, strict=False)
                     if segment.v != before)
        if segments:
            v, i = segments[-1].v, segments[-1].i
        if isinstance(step, RestStep):
            assert v == 0
            continue
        volts = step.to_v if isinstance(step, RampStep) else step.v
        short_v, code_v = volts - DEMO.voltage.program.value(v), DEMO.voltage.program.quantum
        # The ceiling's word rounds down (S2): there, and only there, a word may lie up to a whole code low.
        assert 0.0 <= short_v < code_v if v == DEMO.settings()["vmax"] else abs(short_v) <= 0.5001 * code_v
        if isinstance(step, RampStep):
            # A code's time at each end, and a tick; never less than the slew ceiling (rounded down to a code) allows.
            slack = DEMO.voltage.program.quantum / step.slew_v_per_s + 1e-4 + 1e-4 * step.duration_s
            assert abs(moving / 10_000 - step.duration_s) <= slack
