"""The table of limits and how it is made from a bench and a step."""

from dataclasses import replace
from pathlib import Path

import pytest

from hvhost.bench.file import load_bench
from hvhost.bench.model import Bench
from hvhost.guard.guard import Guard
from hvhost.guard.limits import limits_of, orientation_of
from hvhost.plan.program import HoldStep, Pause, Program, RampStep, StepLimits
from hvhost.wire.vocabulary import HostRule, Inputs
from hvhost.words.errors import CommandRefused
from tests.guard.build import block, limits

CONFIGS = Path(__file__).parents[2] / "configs"
DEMO = load_bench(CONFIGS / "demo.bench.yaml")
SMALL = load_bench(CONFIGS / "small.bench.yaml")
RAMP = RampStep(number=1, name="up", place="p:1", to_v=10e3, slew_v_per_s=500.0, limit_a=1e-3)
HOLD = HoldStep(number=2, name="hold", place="p:2", v=10e3, limit_a=1e-3, hold_s=60.0, at_most_s=90.0, tolerance=0.01)
PROGRAM = Program(kind="plan", title="t", steps=(RAMP, HOLD, replace(RAMP, number=3, to_v=20e3)), v_highest=20e3,
                  i_highest=1e-3, duration_s=200.0)


@pytest.mark.parametrize("bench", [DEMO, SMALL], ids=lambda b: b.name)
def test_limits_lie_at_or_below_the_benchs_own(bench: Bench) -> None:
    """Rounding to codes never loosens: each code is the last one not above the bench's limit."""
    found = limits_of(bench, None, None)
    own = bench.limits
    for code, per_code, value in ((found.overcurrent, found.a_per_code, own.overcurrent_a),
                                  (found.level, found.a_per_code, own.overcurrent_level_a),
                                  (found.overvoltage, found.v_per_code, own.overvoltage_v),
                                  (found.drop, found.v_per_code, own.drop_v)):
        assert code * per_code <= value * (1 + 1e-12) < (code + 1) * per_code * (1 + 1e-9)
    assert found.persist == own.persist
    assert found.contacts & Inputs.INTERLOCK


def test_a_step_only_tightens() -> None:
    """Of the bench's and the step's limit the lower holds."""
    loose = StepLimits(trip_a=1.0, level_a=1.0, level_s=1e3, v_over=1e6)
    assert limits_of(DEMO, PROGRAM, replace(RAMP, limits=loose, number=0)) == replace(
        limits_of(DEMO, PROGRAM, RAMP), step=0)
    tight = limits_of(DEMO, PROGRAM, replace(RAMP, limits=StepLimits(trip_a=1e-3, v_over=11e3, arc_energy_j=0.5)))
    assert tight.overcurrent * tight.a_per_code == pytest.approx(1e-3, rel=1e-3)
    assert tight.overvoltage * tight.v_per_code == pytest.approx(11e3, rel=1e-3)
    assert tight.joules(tight.arc_energy) == pytest.approx(0.5, rel=1e-6)


def test_following_is_checked_after_a_twentieth_of_the_ramp() -> None:
    """The rise is taken from where the step before ended, and never less than four zero bands."""
    word_v = DEMO.voltage.program.quantum
    for step in (RAMP, PROGRAM.steps[2]):
        assert limits_of(DEMO, PROGRAM, step).follow_word * word_v == pytest.approx(
            max(500.0, 4 * DEMO.zero_band_v), abs=word_v)


def test_pausing_lets_an_overcurrent_wait_for_its_collapse() -> None:
    """Only a program with an arc pause makes overcurrent wait."""
    pausing = replace(PROGRAM, reaction=Pause(count=3, rest_s=1.0, window_s=60.0))
    assert limits_of(DEMO, pausing, RAMP).arc_wait
    assert not limits_of(DEMO, PROGRAM, RAMP).arc_wait
    assert not limits_of(DEMO, None, None).arc_wait


def test_drain_and_stored_energy_follow_from_the_benchs_capacitance() -> None:
    """One code of current discharges 0.4 C by i t / C; one squared code of voltage holds C / 2 of energy."""
    found = limits_of(DEMO, None, None)
    farad = DEMO.output_f + DEMO.cable_f
    volts = 0.1e-3 / (0.4 * farad) / DEMO.rate_hz  # 0.1 mA for one sample
    codes = round(0.1e-3 / found.a_per_code) * found.drain_q16 / 65536
    assert codes * found.v_per_code == pytest.approx(volts, rel=0.01)
    code = round(10e3 / found.v_per_code)
    assert found.joules(found.stored_q16 * code * code >> 16) == pytest.approx(farad * 10e3**2 / 2, rel=0.01)


def test_the_small_bench_is_negative_and_judged_alike() -> None:
    """A negative bench's limits are oriented: raw codes below zero are volts above it."""
    orientation = orientation_of(SMALL)
    assert SMALL.polarity == -1
    found = limits_of(SMALL, None, None)
    assert found.v_map_q16 > 0
    assert found.i_map_q16 > 0
    low, high = orientation.oriented_limits(voltage=True)
    assert low < 0 < found.overvoltage < high
    over = found.overvoltage + 1
    verdicts = Guard(found).judge(block(0, [over] * 32, [0] * 32, v_word=1))
    assert HostRule.OVERVOLTAGE in {x.rule for x in verdicts}


def test_nonsense_limits_are_refused() -> None:
    """A limit of zero or a persistence beyond four is a mistake of the caller."""
    for wrong in ({"persist": 0}, {"persist": 5}, {"overcurrent": 0}, {"drop_samples": 0}, {"stale_ms": 0}):
        with pytest.raises(CommandRefused):
            limits(**wrong)
