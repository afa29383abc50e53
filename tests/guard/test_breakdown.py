"""The energy that a step's arcs have taken."""

import pytest

from hvhost.guard.guard import Guard
from hvhost.wire.vocabulary import HostRule, McuState
from tests.guard.build import block, limits

STRIKE = [10000] * 8 + [1000] * 8 + [10000] * 16


def energy_trips(guard: Guard, index: int) -> bool:
    """Feed one strike; tell whether the energy rule tripped."""
    found = guard.judge(block(index, STRIKE, [10] * 8 + [2000] * 8 + [10] * 16, v_word=10000))
    return HostRule.ARC_ENERGY in {x.rule for x in found}


def test_energy_is_what_flowed_in_and_what_was_stored() -> None:
    """E = sum(v i) Ts + C dv^2 / 2 by hand: 8 samples of 1 kV, 2 mA, 1 ms, and 1 nF from 10 kV to 1 kV."""
    # stored_q16 = C/2 x v_per_code / a_per_code x rate = 0.5e-9 x 1 / 1e-6 x 1000 = 0.5
    guard = Guard(limits(stored_q16=32768))
    energy_trips(guard, 0)
    flowed = 8 * 1000.0 * 2e-3 * 1e-3
    stored = 0.5 * 1e-9 * (10000.0**2 - 1000.0**2)
    assert guard.arc_energy_j() == pytest.approx(flowed + stored, rel=1e-6)


def test_the_sum_over_a_step_trips_and_a_new_step_begins_anew() -> None:
    """Two strikes exceed what one step may take; the next step starts from nothing."""
    lim = limits(arc_energy=8 * 1000 * 2000 + 8 * 1000 * 2000 - 1, step=1)
    guard = Guard(lim)
    assert not energy_trips(guard, 0)
    assert energy_trips(guard, 32)
    assert not energy_trips(guard, 64)  # told once a step
    guard.with_limits(limits(arc_energy=lim.arc_energy, step=2))
    assert not energy_trips(guard, 96)
    assert guard.arc_energy_j() == pytest.approx(16e-3)


def test_the_sum_outlives_a_pause() -> None:
    """An arc pause between two strikes of one step does not forget the first."""
    guard = Guard(limits(arc_energy=8 * 1000 * 2000 + 1, step=1))
    assert not energy_trips(guard, 0)
    guard.judge(block(32, [0] * 32, [0] * 32, state=McuState.PAUSING))
    assert energy_trips(guard, 64)
