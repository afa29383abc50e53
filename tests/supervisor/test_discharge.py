"""What may be said of the voltage after a cut (S6).

Outside check: a capacitance discharges as V(t) = V0 exp(-t / tau), so from 10 kV to 60 V takes tau ln(10000 / 60) =
5.116 tau (textbook; e.g. IEC 61010-1 asks for the time to 60 V d.c.).
"""

import math
from collections.abc import Callable

import pytest

from hvhost.supervisor.discharge import Chain, Discharge
from hvhost.supervisor.states import Voltage

TAU_S, BLOCK_S = 2.0, 0.032
CHAIN = Chain(touch_v=60.0, bleed_s=TAU_S, bleeds=8, slew_v_per_s=5e3, u_zero_v=5.0, measured_here=True)


class Watch:
    """A discharge fed block by block."""

    def __init__(self, chain: Chain = CHAIN) -> None:
        self.discharge = Discharge(chain)
        self.t_s = 0.0
        self.seen: list[Voltage] = []

    def see(self, volts: Callable[[float], float] | float, seconds: float = BLOCK_S, *, live: bool = False,
            grounded: bool = False) -> Voltage:
        """Blocks of these volts (of the time since now) for so long; returns the last state."""
        begun, blocks = self.t_s, max(1, round(seconds / BLOCK_S))
        for _ in range(blocks):
            self.t_s += BLOCK_S
            value = volts(self.t_s - begun) if callable(volts) else volts
            state = self.discharge.take(self.t_s, value, 5.0 + 0.003 * abs(value), live=live, grounded=grounded)
            self.seen.append(state)
        return state

    def energised(self, volts: float = 10e3) -> "Watch":
        """On for a second, then cut."""
        self.see(volts, 1.0, live=True)
        self.discharge.cut(self.t_s)
        self.seen.clear()
        return self


def fall(v0: float, tau_s: float = TAU_S) -> Callable[[float], float]:
    """An exponential fall."""
    return lambda t_s: v0 * math.exp(-t_s / tau_s)


def test_a_fall_that_fits_the_bleed_time_ends_below_the_threshold() -> None:
    """Falling, then below; never sooner than the textbook's time to 60 V, since the bound counts and not the mean."""
    watch = Watch().energised()
    watch.see(fall(10e3), 20.0)
    assert set(watch.seen) == {Voltage.FALLING, Voltage.BELOW}
    reached_s = BLOCK_S * (1 + watch.seen.index(Voltage.BELOW))
    assert reached_s > TAU_S * math.log(10e3 / 60.0)
    assert watch.seen.index(Voltage.BELOW) == len(watch.seen) - watch.seen[::-1].index(Voltage.FALLING)
    assert watch.discharge.bleeds_passed(watch.t_s) == pytest.approx(10.0, rel=0.02)


@pytest.mark.parametrize("v0", [10e3, 2e3, 150.0, 100.0])
@pytest.mark.parametrize("share", [1.0, 0.5, 0.2])
def test_a_jump_to_zero_is_measurement_lost(v0: float, share: float) -> None:
    """At once, or spread over two blocks: no discharge falls so; it is never below the threshold afterwards."""
    watch = Watch().energised(v0)
    watch.see(v0 * share)
    watch.see(0.0, 30.0)
    assert Voltage.BELOW not in watch.seen
    assert watch.seen[-1] is Voltage.UNKNOWN
    assert watch.discharge.lost or v0 < CHAIN.touch_v * 2
    if v0 > 120.0:
        assert "measurement lost" in watch.discharge.text


def test_a_collapse_just_before_the_cut_is_lost_as_well() -> None:
    """The reading fell while still energised: an arc and a broken lead look alike."""
    watch = Watch()
    watch.see(10e3, 1.0, live=True)
    watch.see(50.0, live=True)
    watch.discharge.cut(watch.t_s)
    assert watch.see(10.0, 5.0) is Voltage.UNKNOWN
    assert watch.discharge.lost


def test_what_is_left_after_a_jump_may_show_that_the_monitor_measures() -> None:
    """A breakdown leaves 2 kV, and these fall as they should: that fall was seen."""
    watch = Watch().energised()
    watch.see(fall(2e3), 15.0)
    assert Voltage.UNKNOWN not in watch.seen
    assert watch.seen[-1] is Voltage.BELOW


def test_an_absorption_tail_is_no_lost_measurement() -> None:
    """80 V that fall with 9 s, slower than the bleed time of 2 s: falling, then below."""
    watch = Watch().energised()
    watch.see(lambda t_s: 9.92e3 * math.exp(-t_s / 1.0) + 80.0 * math.exp(-t_s / 9.0), 25.0)
    assert set(watch.seen) == {Voltage.FALLING, Voltage.BELOW}
    assert not watch.discharge.lost


def test_a_tail_above_the_threshold_after_an_arc_is_shown_as_voltage() -> None:
    """What may be dangerous is told, however doubtful the measurement."""
    watch = Watch().energised()
    watch.see(0.0, 0.5)
    assert watch.see(lambda t_s: 80.0 * (1.0 - math.exp(-t_s)), 5.0) is Voltage.FALLING


def test_a_later_rise_restarts_the_clock() -> None:
    """Below, up by 25 V, and below again only after one quiet bleed time."""
    watch = Watch().energised()
    assert watch.see(fall(10e3), 17.0) is Voltage.BELOW
    assert watch.see(0.0, 1.0) is Voltage.BELOW
    watch.seen.clear()
    watch.see(28.0, TAU_S - 0.1)
    assert set(watch.seen) == {Voltage.FALLING}
    assert "rose again" in watch.discharge.text
    assert watch.see(28.0, 0.3) is Voltage.BELOW


def test_a_rise_above_the_threshold_is_waited_out_too() -> None:
    """Up to 100 V and back: below again only after a quiet bleed time."""
    watch = Watch().energised()
    watch.see(fall(10e3), 20.0)
    assert watch.see(100.0) is Voltage.FALLING
    assert watch.see(70.0, 1.0) is Voltage.FALLING
    watch.seen.clear()
    watch.see(40.0, TAU_S - 0.1)
    assert set(watch.seen) == {Voltage.FALLING}
    assert watch.see(40.0, 0.3) is Voltage.BELOW


def test_an_idle_bench_claims_nothing_without_a_fall_that_was_seen() -> None:
    """After a restart zero volts on the display may be a dead divider: unknown, and the reason in words."""
    watch = Watch()
    assert watch.see(0.0, 60.0) is Voltage.UNKNOWN
    assert "no fall was seen" in watch.discharge.text
    assert watch.discharge.bleeds_passed(watch.t_s) is None  # no cut was told, so none is counted from


def test_a_fall_from_just_above_the_threshold_shows_too_little() -> None:
    """A run at 90 V cannot show that the monitor measures."""
    watch = Watch().energised(90.0)
    watch.see(fall(90.0), 20.0)
    assert Voltage.BELOW not in watch.seen


def test_where_it_is_not_measured_it_says_so_however_smooth_the_fall() -> None:
    """Monitor unpowered or elsewhere, or a zero coarser than the threshold: not measured here, and bleed times."""
    for chain in (Chain(touch_v=60.0, bleed_s=TAU_S, bleeds=8, slew_v_per_s=5e3, u_zero_v=5.0, measured_here=False),
                  Chain(touch_v=60.0, bleed_s=TAU_S, bleeds=8, slew_v_per_s=5e3, u_zero_v=40.0, measured_here=True)):
        watch = Watch(chain).energised()
        watch.see(fall(10e3), 20.0)
        assert set(watch.seen) == {Voltage.UNKNOWN}
        assert watch.discharge.text == "not measured here"
        assert watch.discharge.bleeds_passed(watch.t_s) == pytest.approx(10.0, rel=0.02)


def test_a_lower_that_brings_the_voltage_down_is_a_fall() -> None:
    """At the down-slew, while still energised: seen, and fits."""
    watch = Watch()
    watch.see(10e3, 1.0, live=True)
    watch.see(lambda t_s: max(0.0, 10e3 - 5e3 * t_s), 2.2, live=True)
    watch.discharge.cut(watch.t_s)
    assert watch.see(5.0) is Voltage.BELOW


def test_a_grounding_contact_is_a_position_and_starts_nothing() -> None:
    """Grounded while it says so; a reading above the threshold contradicts it; lifted, nothing is claimed."""
    watch = Watch().energised()
    watch.see(fall(10e3), 4.0)
    assert watch.see(3.0, 1.0, grounded=True) is Voltage.GROUNDED
    assert "not a proof" in watch.discharge.text
    assert watch.see(3.0, 1.0) is Voltage.UNKNOWN
    assert watch.see(500.0, 1.0, grounded=True) is Voltage.FALLING


def test_a_lost_link_forgets_what_was_seen() -> None:
    """After a silence the fall before it proves nothing."""
    watch = Watch().energised()
    watch.see(fall(10e3), 17.0)
    watch.discharge.unknown("no readback")
    assert watch.see(10.0, 10.0) is Voltage.UNKNOWN


def test_while_energised_it_is_present_and_no_bleed_time_passes() -> None:
    """On is on, at whatever reading."""
    watch = Watch()
    assert watch.see(0.0, 1.0, live=True) is Voltage.PRESENT
    assert watch.discharge.bleeds_passed(watch.t_s) is None
