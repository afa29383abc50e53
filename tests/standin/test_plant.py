"""The plant's physics against closed forms, and the acts at the bench."""

from dataclasses import replace
from math import exp, log

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hvhost.standin.faults import FAULTS, FaultBook, Place, parse_fault
from hvhost.standin.params import demo, gap, small
from hvhost.standin.plant import Plant
from hvhost.wire.vocabulary import Inputs
from tests.standin.benches import MS, cut, fragile, kinds, live, run, tough


def bare(capacitance_f: float, ohm: float) -> Plant:
    """A plant whose node is one capacitor and one resistor: nothing absorbs, nothing else leaks."""
    params = tough(output_f=capacitance_f, bleed_ohm=ohm, slew_v_per_s=1e9)
    return live(replace(params, cable_f=1e-18, chain=replace(params.chain, high_ohm=1e18, low_ohm=4e14, low_f=1e-18,
                                                               at_specimen=False)),
                1, "lead-off")


@pytest.mark.parametrize(("start_v", "taus"), [
    # t = tau ln(V0 / V) down to 60 V, the d.c. touch limit of IEC 61010-1; times computed by hand from that formula
    (5e3, 4.422849), (10e3, 5.115996), (20e3, 5.809143)])
def test_discharge_takes_the_time_of_an_rc(start_v: float, taus: float) -> None:
    """After a cut the output falls to 60 V in tau ln(V0/60 V): 10 nF and 100 MΩ give tau = 1 s."""
    plant = bare(10e-9, 100e6)
    run(plant, 1.0, start_v)
    assert plant.v_true == pytest.approx(start_v, rel=1e-4)
    cut(plant)
    plant.advance(0.3 * MS, 0.0, 0.0)
    began_s, began_v = plant.t_s, plant.v_true
    while plant.v_true > 60.0:
        plant.advance(1 * MS, 0.0, 0.0)
    assert plant.t_s - began_s == pytest.approx(log(began_v / 60.0), abs=2 * MS)
    assert log(start_v / 60.0) == pytest.approx(taus, abs=1e-6)


def test_five_time_constants_are_not_touch_safe() -> None:
    """From 20 kV five time constants leave 134.8 V (20 kV times exp(-5))."""
    plant = bare(10e-9, 100e6)
    run(plant, 1.0, 20e3)
    cut(plant)
    plant.advance(0.2 * MS, 0.0, 0.0)
    plant.advance(5.0, 0.0, 0.0)
    assert plant.v_true == pytest.approx(134.8, rel=2e-3)


def test_current_limit_charges_a_capacitor_by_i_over_c() -> None:
    """In current limit V rises by I / C: 1 mA into 10 nF is 100 V per ms (definition of capacitance)."""
    plant = bare(10e-9, 1e12)
    run(plant, 0.05, 20e3, 1e-3)
    before_v = plant.v_true
    run(plant, 0.01, 20e3, 1e-3)
    assert plant.v_true - before_v == pytest.approx(1000.0, rel=1e-3)


def test_rc_charging_through_a_leak_ends_at_i_times_r() -> None:
    """With 1 mA into 1 MΩ and 10 nF, V = I R (1 - exp(-t / RC)), 63.2 % after one time constant of 10 ms."""
    plant = bare(10e-9, 1e6)
    supply = plant.params.supply
    for _ in range(100):  # let the programming filter settle first with the output clamped by inhibit
        plant.drive(inhibit=True, clear=False, relay=True)
        plant.advance(1 * MS, 10.0, 1e-3 / supply.i_full * supply.program_full_v)
    plant.drive(inhibit=False, clear=False, relay=True)
    plant.advance(supply.inhibit_s, 10.0, 2.5)
    plant.advance(10 * MS, 10.0, 2.5)
    assert plant.v_true == pytest.approx(1000.0 * (1.0 - exp(-1.0)), rel=1e-3)


def test_steps_of_any_size_give_the_same_discharge() -> None:
    """The closed form does not depend on how time is cut up."""
    ends = []
    for dt_s in (0.1 * MS, 1 * MS, 5 * MS):
        plant = bare(2e-9, 1e9)
        run(plant, 1.0, 10e3)
        cut(plant)
        for _ in range(round(0.5 / dt_s)):
            plant.advance(dt_s, 0.0, 0.0)
        ends.append(plant.v_true)
    assert ends[0] == pytest.approx(ends[1], rel=1e-6)
    assert ends[0] == pytest.approx(ends[2], rel=1e-6)


def test_one_quadrant_supply_cannot_pull_the_load_down() -> None:
    """With the set-point at zero and the output stage live the voltage only bleeds away."""
    plant = live(tough(), 1, "lead-off")
    run(plant, 1.0, 10e3)
    run(plant, 0.1, 0.0)
    # 1.5 nF on 1 GΩ of bleed beside 1 GΩ of divider: tau = 0.75 s
    assert plant.v_true == pytest.approx(10e3 * exp(-0.1 / 0.75), rel=0.01)


@pytest.mark.parametrize(("remote_v", "panel_v", "won_v"), [(8e3, 5e3, 5e3), (3e3, 5e3, 3e3)])
def test_lower_of_panel_and_programming_wins_for_voltage(remote_v: float, panel_v: float, won_v: float) -> None:
    """The lower of local and remote set-point wins (common practice of bench supplies)."""
    plant = live(replace(tough(), panel_v=panel_v))
    run(plant, 1.0, remote_v)
    assert plant.v_true == pytest.approx(won_v, rel=1e-6)


@pytest.mark.parametrize(("remote_a", "panel_a", "won_a"), [(2e-3, 1e-3, 1e-3), (0.5e-3, 1e-3, 0.5e-3)])
def test_lower_of_panel_and_programming_wins_for_current(remote_a: float, panel_a: float, won_a: float) -> None:
    """The same for the current limit, into a short."""
    plant = live(replace(tough(), panel_a=panel_a), 1, "short")
    run(plant, 0.5, 10e3, remote_a)
    assert plant.i_true == pytest.approx(won_a, rel=1e-2)


def test_ramp_charging_current_is_c_times_slew() -> None:
    """What leaves the supply while ramping is C dV/dt of cable and specimen, plus leakage."""
    plant = live(replace(tough(), cable_f=5e-9, specimen=replace(tough().specimen, insulation_ohm=1e15, branches=())))
    supply = plant.params.supply
    for step in range(2000):
        plant.advance(1 * MS, step / 1000 * 1000.0 / supply.v_full * supply.program_full_v, 10.0)
    leak_a = plant.v_true / 1e9
    assert plant.i_true - leak_a == pytest.approx(5.5e-9 * 1000.0, rel=0.01)


def test_absorption_brings_a_voltage_back() -> None:
    """A specimen grounded briefly after a hold charges itself up again: dielectric absorption."""
    plant = live()
    run(plant, 60.0, 15e3, dt_s=10 * MS)
    cut(plant)
    run(plant, 1.0, 0.0)
    plant.ground(True)
    run(plant, 0.1, 0.0)
    grounded_v = plant.v_true
    plant.ground(False)
    run(plant, 1.0, 0.0)
    assert grounded_v < 10.0
    assert plant.v_true > 60.0


def test_leakage_falls_during_a_hold() -> None:
    """Absorption makes the current fall from early to late in a hold."""
    plant = live()
    run(plant, 1.0, 10e3)
    early_a = plant.i_true
    run(plant, 60.0, 10e3, dt_s=10 * MS)
    assert plant.i_true < early_a
    assert plant.i_true > 10e3 / 2e9


def test_power_needs_relay_and_contactor() -> None:
    """An opened interlock takes the supply's power by itself, latches, and only the reset outside gives it back."""
    plant = live()
    run(plant, 0.2, 10e3)
    plant.interlock(False)
    run(plant, 0.05, 10e3)
    assert not plant.power
    assert not plant.inputs() & Inputs.DANGER
    plant.interlock(True)
    run(plant, 0.5, 10e3)
    assert plant.inputs() & Inputs.INTERLOCK
    assert not plant.power
    assert plant.outside_reset()
    assert plant.power


def test_arc_collapses_the_voltage_and_draws_the_limit() -> None:
    """A struck arc takes the output down to burning voltage plus drop at the tip resistor, in current limit."""
    plant = live(fragile(8e3))
    run(plant, 2.0, 9e3, 2e-3)
    assert "arc" in kinds(plant)
    assert plant.specimen.arcing
    assert plant.v_node == pytest.approx(60.0 + 2e-3 * 20e3, rel=1e-3)
    assert plant.i_true == pytest.approx(2e-3, rel=1e-3)


def test_arc_goes_out_after_the_cut_and_a_solid_stays_punctured() -> None:
    """Without current the arc quenches; a solid specimen then leaks through its puncture."""
    plant = live(fragile(8e3))
    run(plant, 2.0, 9e3, 2e-3)
    cut(plant)
    run(plant, 0.1, 0.0)
    assert kinds(plant)[-1] in ("quench", "power off")
    assert "quench" in kinds(plant)
    assert plant.specimen.punctured
    assert plant.specimen.conductance_s == pytest.approx(1.0 / 2e6)


def test_a_gap_restrikes_when_its_limit_is_below_the_holding_current() -> None:
    """Below the holding current a self-restoring gap relaxes: quench, charge, strike again."""
    plant = live(fragile(8e3, self_restoring=True))
    run(plant, 3.0, 12e3, 0.3e-3, dt_s=0.5 * MS)
    seen = kinds(plant)
    assert seen.count("quench") > 2
    assert seen.count("restrike") + seen.count("arc") > 2


def test_gap_profile_comes_back_to_full_strength() -> None:
    """The gap breaks down, goes out under the inhibit, and after seconds of rest needs its full voltage again."""
    plant = live(gap(), 3)
    volts = []
    for _ in range(3):
        plant.drive(inhibit=False, clear=False, relay=True)
        for step in range(0, 20_000, 10):
            run(plant, 5 * MS, float(step), 2e-3, dt_s=5 * MS)
            if plant.specimen.arcing:
                break
        volts.append(next(e.value for e in plant.events if e.kind == "arc"))
        plant.drive(inhibit=True, clear=True, relay=True)
        run(plant, 3.0, 0.0, 0.0)
        assert not plant.specimen.arcing
        plant.events.clear()
    assert all(13e3 < v < 18e3 for v in volts)
    assert len(set(volts)) == 3


def test_breakdown_voltage_depends_on_the_seed() -> None:
    """The demo specimen breaks down by itself, at a voltage that the seed decides, far above its hold."""
    volts = []
    for seed in range(6):
        plant = live(demo(), seed)
        for step in range(0, 25_000, 5):
            run(plant, MS * 5, float(step), dt_s=5 * MS)
            if plant.events:
                break
        volts.append(plant.events[0].value)
    assert len({round(v) for v in volts}) == 6
    assert all(13e3 < v < 21e3 for v in volts)


@pytest.mark.parametrize("params", [demo(), small()], ids=["demo", "small"])
def test_same_seed_same_codes(params: object) -> None:
    """One seed decides everything: codes and events repeat exactly."""
    def story() -> tuple[list[tuple[int, int]], list[object]]:
        plant = live(params, 42, "arc@0.4s", "v-spike@0.2s", "arm-bounce")  # type: ignore[arg-type]
        plant.press(0.3)
        codes = []
        for step in range(600):
            run(plant, MS, min(4e3, step * 20.0), 1e-3)
            codes.append(plant.sample())
        return codes, list(plant.events)

    assert story() == story()


def test_another_seed_gives_other_noise() -> None:
    """Seeds differ from the first sample on."""
    assert [Plant(demo(), 1).sample() for _ in range(3)] != [Plant(demo(), 2).sample() for _ in range(3)]


def test_arc_burst_strikes_so_often() -> None:
    """A burst of five is five arcs, and the specimen is as it was before."""
    plant = live(fragile(1e9))
    run(plant, 0.5, 10e3)
    plant.faults.on("arc-burst", 5.0)
    run(plant, 0.3, 10e3, dt_s=0.2 * MS)
    seen = kinds(plant)
    assert seen.count("arc") + seen.count("restrike") == 5
    assert seen.count("quench") == 5
    assert not plant.specimen.punctured
    assert plant.v_true == pytest.approx(10e3, rel=1e-3)


def test_dip_is_partial_and_recovers() -> None:
    """A dip takes a share of the voltage and the supply makes it good within milliseconds."""
    plant = live()
    run(plant, 0.5, 10e3)
    plant.faults.on("dip", 0.9)
    plant.advance(0.01 * MS, 4.0, 10.0)
    assert plant.v_true < 9.1e3
    run(plant, 0.05, 10e3)
    assert plant.v_true == pytest.approx(10e3, rel=1e-3)
    assert "arc" not in kinds(plant)


@pytest.mark.parametrize(("fault", "volts"), [
    ("program-open", 0.0), ("panel-v=5kV", 5e3), ("runaway=20kV", 20e3), ("program-offset=500V", 10.5e3)])
def test_supply_faults_move_the_output(fault: str, volts: float) -> None:
    """Faults of the supply change what really comes out, not only what is read."""
    plant = live(tough(), 1, fault)
    run(plant, 3.0, 10e3)
    assert plant.v_true == pytest.approx(volts, rel=1e-3, abs=1.0)


def test_inhibit_dead_keeps_the_output_live() -> None:
    """An inhibit without effect leaves the voltage up although the MCU asserts it."""
    plant = live(tough(), 1, "inhibit-dead", "clear-dead")
    run(plant, 0.5, 10e3)
    plant.drive(inhibit=True, clear=True, relay=True)
    run(plant, 1.0, 10e3)
    assert plant.v_true == pytest.approx(10e3, rel=1e-3)
    assert not plant.inputs() & Inputs.INHIBIT_BACK


def test_mains_lost_comes_back_by_itself() -> None:
    """With the relay still closed the power returns when the mains does, and the danger signal tells."""
    plant = live(tough(), 1, "mains-lost@1s+0.5s")
    run(plant, 1.2, 5e3)
    assert not plant.inputs() & Inputs.DANGER
    run(plant, 0.5, 5e3)
    assert plant.inputs() & Inputs.DANGER
    assert [e.detail or e.kind for e in plant.events] == ["mains-lost", "power off", "mains-lost", "power on"]


def test_fault_by_voltage_comes_at_that_voltage() -> None:
    """`name@8kV` waits for the true voltage."""
    plant = live(tough(), 1, "arc@8kV")
    for step in range(2000):
        run(plant, MS, step * 5.0)
        if "arc" in kinds(plant):
            break
    struck = next(e for e in plant.events if e.kind == "arc")
    assert struck.value == pytest.approx(8e3, abs=20.0)


def test_lead_off_takes_capacitance_and_leakage_away() -> None:
    """With the lead off nothing of the specimen is seen."""
    plant = live(tough(), 1, "lead-off")
    run(plant, 1.0, 10e3)
    assert plant.i_true == pytest.approx(10e3 / (1e9 + 1e9 / 2499.0), rel=1e-6)


def test_recording_plays_while_the_output_is_released() -> None:
    """A recording's codes stand in for the plant's from the release on, until they end."""
    plant = live()
    plant.drive(inhibit=True, clear=True, relay=True)
    run(plant, MS, 0.0)
    plant.play([(101, 11), (102, 12)])
    assert plant.sample() == (0, 0)
    plant.drive(inhibit=False, clear=False, relay=True)
    run(plant, MS, 0.0)
    assert [plant.sample() for _ in range(3)] == [(101, 11), (102, 12), (0, 0)]


def test_new_specimen_is_whole_again() -> None:
    """Replacing a punctured specimen gives full strength and insulation."""
    plant = live(fragile(8e3))
    run(plant, 2.0, 9e3, 2e-3)
    cut(plant)
    run(plant, 0.1, 0.0)
    plant.new_specimen()
    assert not plant.specimen.punctured
    assert plant.specimen.strength_v > 7e3


def test_advance_splits_at_a_contact_that_moves() -> None:
    """A contact acts at its own time, however large the step is."""
    plant = Plant(demo(), 1)
    plant.drive(inhibit=True, clear=True, relay=True)
    plant.advance(1.0, 0.0, 0.0)
    assert plant.events[0].kind == "power on"
    assert plant.events[0].t_s == pytest.approx(demo().contacts.relay_operate_s)


plant_faults = sorted(name for name, fault in FAULTS.items() if fault.place not in (Place.WIRE, Place.MCU))


@settings(max_examples=40, deadline=None)
@given(st.lists(st.sampled_from(plant_faults), max_size=4, unique=True), st.integers(0, 1000),
       st.lists(st.tuples(st.booleans(), st.booleans(), st.booleans(), st.floats(0, 10), st.floats(0, 10)), max_size=6))
def test_no_faults_together_break_the_plant(names: list[str], seed: int, drives: list[tuple]) -> None:
    """Any faults together, any outputs: codes stay within the converters, voltage finite and never wrong-signed."""
    plant = Plant(demo(), seed, FaultBook([parse_fault(f"{name}@0.02s") for name in names]))
    limits = demo().chain.v_adc
    for inhibit, clear, relay, v_cmd, i_cmd in drives:
        plant.drive(inhibit=inhibit, clear=clear, relay=relay)
        for _ in range(15):
            plant.advance(2 * MS, v_cmd, i_cmd)
            assert all(limits.low <= code <= limits.high for code in plant.sample())
            assert -1.0 < plant.v_true < 1.1e6
            assert 0 <= plant.inputs() < 512
