"""The supply's reference: programming filter, slew, panel, clear."""

from dataclasses import replace
from math import exp

import pytest

from hvhost.standin.params import demo
from hvhost.standin.supply import Supply


def stepped(supply: Supply, steps: int, v_cmd: float, i_cmd: float = 10.0, live: bool = True, clear: bool = False,
            dt_s: float = 1e-3) -> Supply:
    """Let so many steps pass."""
    for _ in range(steps):
        supply.step(dt_s, v_cmd, i_cmd, live, clear)
    return supply


def test_full_scale_programming_asks_for_full_output() -> None:
    """10 V at the inputs are 25 kV and 4 mA on the demo supply (0-10 V programming, common practice)."""
    supply = stepped(Supply(demo()), 2000, 10.0)
    assert supply.reference_v == pytest.approx(25e3)
    assert supply.limit_a == pytest.approx(4e-3)


def test_programming_input_is_an_rc() -> None:
    """The programming voltage follows with its time constant: 63.2 % after 2 ms."""
    supply = Supply(demo())
    supply.step(2e-3, 10.0, 10.0, False, False)
    assert supply.v_program == pytest.approx(10.0 * (1.0 - exp(-1.0)))


def test_slew_limits_the_reference_both_ways() -> None:
    """The supply's own slew bounds what the programming asks for."""
    params = demo()
    params = replace(params, supply=replace(params.supply, slew_v_per_s=1e3))
    supply = stepped(Supply(params), 1000, 10.0)
    assert supply.reference_v == pytest.approx(1e3)
    stepped(supply, 500, 0.0)
    # the programming filter holds the old value for some milliseconds first
    assert supply.reference_v == pytest.approx(500.0, abs=20.0)


def test_not_live_means_from_zero() -> None:
    """An inhibit takes the reference to zero at once; released, it climbs from there."""
    supply = stepped(Supply(demo()), 1000, 5.0)
    stepped(supply, 1, 5.0, live=False)
    assert (supply.reference_v, supply.limit_a) == (0.0, 0.0)
    stepped(supply, 1, 5.0)
    assert supply.reference_v == pytest.approx(60.0)


def test_clear_empties_the_programming_inputs() -> None:
    """Clear acts although the converters still give their voltage."""
    supply = stepped(Supply(demo()), 1000, 5.0)
    stepped(supply, 5, 5.0, clear=True)
    assert supply.v_program < 1e-9
    assert supply.i_program < 1e-9


def test_limit_dead_gives_full_current() -> None:
    """A current set-point that is ignored lets five per cent more than full current flow."""
    supply = Supply(demo())
    supply.settle({"limit-dead": 1.0})
    assert stepped(supply, 1000, 5.0, 0.1).limit_a == pytest.approx(4.2e-3)
