"""Preflight, the physics, one check at a time."""

from collections.abc import Callable
from dataclasses import replace

import pytest

from hvhost.bench.model import Bench
from hvhost.plan.plan import Plan, RunSheet
from hvhost.plan.preflight import History, preflight
from hvhost.words.findings import Finding, Grade

Look = Callable[..., dict[str, Finding]]


@pytest.fixture
def look(plan_of: Callable[..., Plan], sheet: Callable[..., RunSheet], demo: Bench) -> Look:
    """Preflight of some steps on the demonstration bench: findings by what they are about."""
    def looked(steps: str, head: str = "", tail: str = "", more: str = "", bench: Bench | None = None
               ) -> dict[str, Finding]:
        result = preflight(plan_of(steps, head, tail), sheet(more), bench or demo, history=History())
        gravest_last = reversed(result.findings)
        return {finding.what: finding for finding in gravest_last if finding.what != "connected"}
    return looked


def test_ceilings(look: Look) -> None:
    """S2: voltage, current and slew above the bench's are refused at the step's line."""
    found = look("- ramp: {to: 24.1 kV, rate: 1 kV/s}\n- ramp: {to: 24.2 kV, rate: 6 kV/s, current_limit: 5 mA}")
    assert {f.grade for f in found.values() if f.what != "stored energy"} == {Grade.REFUSE}
    assert (found["ramp 1"].line, found["ramp 1"].expected) == (5, "at most the bench's 24 kV")
    assert (found["ramp 2: rate"].line, found["ramp 2: rate"].found) == (6, "6 kV/s")
    assert found["ramp 2: current_limit"].found == "5 mA"


def test_exactly_the_ceiling_is_allowed(look: Look) -> None:
    """The ceiling itself is no fault."""
    assert {f.grade for f in look("- ramp: {to: 24 kV, rate: 5 kV/s, current_limit: 4 mA}").values()} <= {Grade.NOTE}


def test_longest_time_on(look: Look, demo: Bench) -> None:
    """Longer than the bench may stay on is refused; alone beyond the stated time a reason is due."""
    steps = "- ramp: {to: 5 kV, rate: 1 kV/s}\n- hold: {for: 4 h, at_most: 4 h}"
    assert look(steps)["duration"].grade is Grade.REFUSE
    assert look(steps, bench=replace(demo, longest_on_s=1e6)) == {}


def test_limits_only_tighten(look: Look) -> None:
    """A trip above the bench's own, an overvoltage below the step's own voltage."""
    found = look("- ramp: {to: 5 kV, rate: 1 kV/s, limits: {trip: 6 mA, overvoltage: 4 kV, level: 1 mA, "
                 "level_time: 1 s}}")
    assert found["limits.trip"].grade is Grade.REFUSE
    assert found["limits.overvoltage"].expected == "above the step's own 5 kV"
    assert found["limits.level_time"].expected == "at most the bench's own 0.5 s"


def test_a_trip_that_the_supply_never_reaches_is_noted(look: Look) -> None:
    """With a current limit of 1 mA a trip at 2 mA says nothing about leakage."""
    found = look("- ramp: {to: 5 kV, rate: 1 kV/s, current_limit: 1 mA, limits: {trip: 2 mA}}")
    assert found["limits.trip"].grade is Grade.NOTE


def test_charging_current(look: Look) -> None:
    """I = C dV/dt: 1.5 nF of the bench and 10 nF at 1 kV/s are 11.5 µA."""
    proof = "connected: {capacitance: {from: 1 nF, to: 10 nF}}"
    steps = "- ramp: {{to: 5 kV, rate: 1 kV/s, current_limit: {}}}"
    assert look(steps.format("11 µA"), more=proof)["ramp: charging current"].grade is Grade.REFUSE
    found = look(steps.format("20 µA"), more=proof)["ramp: charging current"]
    assert found.grade is Grade.NOTE
    assert found.found == "11.5 µA to charge 11.5 nF at 1 kV/s"
    assert "ramp: charging current" not in look(steps.format("30 µA"), more=proof)


@pytest.mark.parametrize(("to", "farads", "told"), [
    ("15 kV", "1.49 nF", False), ("15 kV", "1.51 nF", True),  # 45 µC at 15 kV: 3.00 nF in all
    ("20 kV", "0.249 nF", False), ("20 kV", "0.251 nF", True),  # 350 mJ at 20 kV: 1.75 nF in all
])
def test_stored_energy_against_the_published_limits(to: str, farads: str, told: bool, look: Look) -> None:
    """45 µC up to 15 kV, 350 mJ above (IEC 61010-1 6.3.1, from memory; the bench itself has 1.5 nF)."""
    proof = f"connected: {{capacitance: {{from: 1 pF, to: {farads}}}}}"
    found = look(f"- ramp: {{to: {to}, rate: 1 kV/s}}", more=proof)
    assert ("stored energy" in found) is told


def test_stored_energy_against_the_discharge_resistor(look: Look) -> None:
    """E = C V²/2: 200 nF at 15 kV are 22.7 J with the bench's own, more than the resistor's 20 J."""
    found = look("- ramp: {to: 15 kV, rate: 1 kV/s}", more="connected: {capacitance: {from: 1 nF, to: 200 nF}}")
    assert found["stored energy"].grade is Grade.REFUSE
    assert found["stored energy"].found.startswith("22.7 J in 201.5 nF")


RETREAT = "specimen: self-restoring\narc: {{reaction: pause, count: {}, rest: {}, window: {}}}\n" \
          "retreat: {{back: 20 %, climb: {}, series: {}}}"
UNTIL = "- ramp: {to: 5 kV, rate: 1 kV/s, until: breakdown}"


def test_arc_reaction_keeps_to_the_benchs_bounds(look: Look) -> None:
    """Count, rest, window, total and climb, each at its own line."""
    found = look(UNTIL, RETREAT.format(51, "400 ms", "59 s", "6 kV/s", 501))
    assert {name: f.grade for name, f in found.items()} == dict.fromkeys(
        ("arc.count", "arc.rest", "arc.window", "retreat.climb", "retreat.series"), Grade.REFUSE)
    assert look(UNTIL, RETREAT.format(50, "500 ms", "60 s", "5 kV/s", 500)) == {}


def test_a_pause_needs_an_inhibit_that_is_read_back(look: Look, demo: Bench) -> None:
    """Without a proven inhibit an arc can only latch."""
    bench = replace(demo, read_backs=frozenset({"relay"}))
    assert look(UNTIL, RETREAT.format(5, "1 s", "60 s", "5 kV/s", 5), bench=bench)["arc"].grade is Grade.REFUSE


def test_a_rest_after_a_breakdown_ends_before_the_pause_expires(look: Look) -> None:
    """The MCU cuts 30 s after the reaction's rest."""
    found = look(f"{UNTIL}\n- rest: 40 s\n{UNTIL}", RETREAT.format(5, "1 s", "60 s", "5 kV/s", 1))
    assert found["rest"].grade is Grade.REFUSE


@pytest.mark.parametrize(("to", "rate"), [("5 kV", "100 V/s"), ("10 kV", "200 V/s"), ("20 kV", "400 V/s")])
def test_raising_of_a_withstand_test(to: str, rate: str, look: Look) -> None:
    """Above 75 % about 2 % of the test voltage per second (IEC 60060-1, from memory): 100, 200 and 400 V/s."""
    steps = f"- ramp: {{{{to: {to}, rate: {{}}}}}}\n- hold: {{{{for: 60 s, at_most: 70 s}}}}"
    tail = "acceptance: [{criterion: level held}]"
    assert not [what for what in look(steps.format(rate), tail=tail) if "rate" in what]
    found = look(steps.format("500 V/s"), tail=tail)["ramp: rate"]
    assert found.grade is Grade.NOTE
    assert found.expected.startswith(f"about {rate} above")


def test_raising_is_free_up_to_three_quarters_and_where_no_withstand_is_judged(look: Look) -> None:
    """A fast first ramp, and a fast ramp to a hold at which leakage is read."""
    assert look("- ramp: {to: 7.5 kV, rate: 5 kV/s}\n- ramp: {to: 10 kV, rate: 200 V/s}\n"
                "- hold: {for: 60 s, at_most: 70 s}", tail="acceptance: [{criterion: level held}]") == {}
    assert look("- ramp: {to: 10 kV, rate: 5 kV/s}\n- hold: {for: 60 s, at_most: 70 s, readings: [60 s]}",
                tail="acceptance: [{criterion: leakage below, limit: 5 µA}]") == {}


def test_a_wider_tolerance_is_noted(look: Look) -> None:
    """2 % for 60 s is more than the standard's 1 %."""
    found = look("- ramp: {to: 5 kV, rate: 100 V/s}\n- hold: {for: 60 s, at_most: 70 s, tolerance: 2 %}",
                 tail="acceptance: [{criterion: level held}]")
    assert (found["hold: tolerance"].grade, found["hold: tolerance"].found) == (Grade.NOTE, "2.00%")


def test_a_level_that_the_chain_cannot_tell_needs_a_reason(look: Look, demo: Bench) -> None:
    """More than 3 % expanded uncertainty at the level (IEC 60060-1)."""
    monitor = replace(demo.voltage.monitor, u_gain=0.016)
    bench = replace(demo, voltage=replace(demo.voltage, monitor=monitor))
    found = look("- ramp: {to: 5 kV, rate: 100 V/s}\n- hold: {for: 60 s, at_most: 70 s}",
                 tail="acceptance: [{criterion: level held}]", bench=bench)
    assert found["hold: uncertainty of the level"].grade is Grade.REASON


def test_below_the_collapse_limit_a_breakdown_is_hard_to_see(look: Look) -> None:
    """A hold at 1 kV with a collapse limit of 1 kV needs a reason; at 1.1 kV it does not."""
    steps = "- ramp: {{to: {0}, rate: 100 V/s}}\n- hold: {{for: 60 s, at_most: 70 s}}"
    assert look(steps.format("1 kV"))["hold"].grade is Grade.REASON
    assert look(steps.format("1.1 kV")) == {}


def test_a_fall_faster_than_the_bleed_is_noted(look: Look) -> None:
    """From 10 kV to 5 kV in 1 s with a bleed time of 2 s: 6 kV are left (V0 exp(-t/tau))."""
    up = "- ramp: {to: 10 kV, rate: 1 kV/s}\n"
    assert look(up + "- ramp: {to: 5 kV, duration: 1 s}")["ramp 2"].grade is Grade.NOTE
    assert look(up + "- ramp: {to: 5 kV, duration: 2 s}") == {}  # 2 tau ln 2 = 1.39 s would do


def test_a_proof_that_the_chain_cannot_give_is_noted(look: Look) -> None:
    """U(C) = 1 µA / (500 V/s) = 2 nF: a specimen of at most 1 nF cannot be told from an open lead; at 4 kV/s it can."""
    proof = "connected: {{capacitance: {{from: 100 pF, to: 1 nF}}, current: {{from: 10 nA, to: {}}}}}"
    found = look("- ramp: {to: 5 kV, rate: 500 V/s}", more=proof.format("900 nA"))
    assert found["connected.capacitance"].found == "U = 2 nF at 500 V/s"
    assert found["connected.current"].found == "U = 1 µA"
    assert look("- ramp: {to: 5 kV, rate: 4 kV/s}", more=proof.format("5 µA")) == {}


def test_a_row_of_short_ramps_may_outrun_the_queue(look: Look) -> None:
    """Twenty ramps of 10 ms in a row, with a queue of 16."""
    row = "- repeat:\n    times: 10\n    steps:\n      - ramp: {to: 1010 V, duration: 10 ms}\n" \
          "      - ramp: {to: 1000 V, duration: 10 ms}"
    found = look("- ramp: {to: 1 kV, rate: 1 kV/s}\n" + row)
    assert any("queue" in finding.expected for finding in found.values())
    assert not any("queue" in f.expected for f in look("- ramp: {to: 1 kV, rate: 1 kV/s}\n"
                                                       + row.replace("10 ms", "100 ms")).values())


def test_a_ramp_below_one_code_a_second_is_noted(look: Look) -> None:
    """25 kV over 65535 codes are 0.38 V each."""
    assert "ramp: rate" in look("- ramp: {to: 100 V, rate: 0.3 V/s}")
    assert look("- ramp: {to: 100 V, rate: 0.4 V/s}") == {}
