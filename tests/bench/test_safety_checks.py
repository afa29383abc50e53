"""Wiring, stored energy and people (S0, S1, S4, S6), each check on both sides of its bound."""

import pytest

from hvhost.bench.file import check_text
from hvhost.words.findings import Grade
from tests.bench.changes import NOTE, REASON, REFUSE, Side, assert_both_sides, changed, findings, name_of

SIDES: list[Side] = [
    (("touch.threshold=60 V",), ("touch.threshold=60.1 V",), REFUSE, "touch.threshold"),
    (("touch.threshold=35 V", "touch.wet=yes"), ("touch.threshold=36 V", "touch.wet=yes"), REFUSE, "touch.threshold"),
    ((), ("interlock.hard_wired=no",), REFUSE, "interlock.hard_wired"),
    ((), ("interlock.emergency_hard_wired=no",), REFUSE, "interlock.emergency_hard_wired"),
    ((), ("danger_signal.fed_from=other",), REFUSE, "danger_signal.fed_from"),
    ((), ("interlock.latches_open=no",), REASON, "interlock.latches_open"),
    ((), ("interlock.emergency_input=no",), REASON, "interlock.emergency_input"),
    ((), ("danger_signal.input=no",), REASON, "danger_signal.input"),
    ((), ("inputs.auxiliary_supplies=no",), REASON, "inputs.auxiliary_supplies"),
    (("inputs.arm=no",), ("cut_path.inhibits_without_mcu=no",), REASON, "cut_path.inhibits_without_mcu"),
    (("cut_path.means=[relay, inhibit]",), ("cut_path.means=[relay, relay, inhibit]",), REFUSE, "cut_path.means"),
    ((), ("cut_path.read_back=[inhibit]",), REASON, "cut_path.read_back"),
    (("cut_path.read_back=[inhibit]", "cut_path.means=[inhibit]", "danger_signal.dark_with_relay_open=no"),
     ("cut_path.means=[inhibit]", "danger_signal.dark_with_relay_open=no"), REFUSE, "cut_path.read_back"),
    (("cut_path.read_back=[inhibit]", "cut_path.means=[inhibit]", "danger_signal.dark_with_relay_open=no"),
     ("cut_path.read_back=[inhibit]", "cut_path.means=[inhibit]"), REFUSE, "danger_signal.dark_with_relay_open"),
    (("bleed.times=6",), ("bleed.times=5",), REFUSE, "bleed.times"),
    (("bleed.time=750 ms",), ("bleed.time=740 ms",), REFUSE, "bleed.time"),
    (("bleed.time=10 ms", "bleed.resistance=1 MΩ"), ("bleed.time=1 ms", "bleed.resistance=1 MΩ"), REFUSE, "bleed.time"),
    (("ground.energy=432 mJ",), ("ground.energy=431 mJ",), REFUSE, "ground.energy"),
    (("ground.resistor=1.1 GΩ",), ("ground.resistor=1.2 GΩ",), REFUSE, "ground.resistor"),
    (("ground.device=switch",), ("ground.device=none", "ground.resistor=", "ground.energy="), REASON, "ground.device"),
    ((), ("attended=no",), REFUSE, "attended"),
    ((), ("voltage.monitor.measured_at=supply",), NOTE, "voltage.monitor.measured_at"),
    ((), ("voltage.monitor.powered_after_cut=no",), NOTE, "voltage.monitor.powered_after_cut"),
    (("voltage.monitor.zero_uncertainty=59 V", "bleed.zero_band=60 V"),
     ("voltage.monitor.zero_uncertainty=60 V", "bleed.zero_band=60 V"), NOTE, "voltage.monitor.zero_uncertainty"),
    (("arcs.total=50",), ("arcs.total=49",), REFUSE, "arcs.total"),
    (("arcs.window=500 ms",), ("arcs.window=499 ms",), REFUSE, "arcs.window"),
    (("arcs.restrike=500 ms",), ("arcs.restrike=501 ms",), REFUSE, "arcs.restrike"),
    (("arcs.count=0", "arcs.total=0", "arcs.window=1 ms"), ("cut_path.means=[relay]", "cut_path.read_back=[relay]"),
     REFUSE, "arcs.count"),
]


@pytest.mark.parametrize(("fine", "faulty", "grade", "key"), SIDES, ids=name_of)
def test_both_sides(fine: tuple[str, ...], faulty: tuple[str, ...], grade: Grade, key: str) -> None:
    """Each check speaks on one side of its bound and is silent on the other."""
    assert_both_sides(fine, faulty, grade, key)


def test_interlock_by_software_is_allowed_below_the_touch_threshold() -> None:
    """S0 speaks of what can hurt: at 50 V the wiring of the loop is no fault."""
    low = ("supply.voltage=50 V", "ceilings.voltage=50 V", "voltage.program.full_scale=50 V",
           "voltage.monitor.full_scale=60 V", "limits.overvoltage=55 V", "limits.collapse=11 V", "bleed.zero_band=1 V",
           "voltage.monitor.zero_uncertainty=1 V", "supply.ripple=1 V", "ceilings.slew=5 V/s", "lower.slew=10 V/s",
           "interlock.hard_wired=no", "interlock.emergency_hard_wired=no", "danger_signal.fed_from=other")
    assert [f.text for f in findings(*low)] == []


def test_programming_alone_is_graded() -> None:
    """A cut that only programs zero needs a reason, and cannot pause."""
    told = findings("cut_path.means=[programming]", "cut_path.read_back=[]", "arcs.count=0", "arcs.total=0",
                    "danger_signal.dark_with_relay_open=no")
    assert [(f.grade, f.what) for f in told] == [(REASON, "cut_path.means")]
    assert "still" in told[0].remedy or "stays powered" in told[0].remedy


@pytest.mark.parametrize(("fire", "heat", "words"), [("yes", "yes", ""), ("no", "yes", "no fire input"), (
    "yes", "no", "no over-temperature input"), ("no", "no", "no fire input and no over-temperature input")])
def test_unattended(fire: str, heat: str, words: str) -> None:
    """Unattended benches name a contact, and lacking inputs make long runs need a reason."""
    text = changed("attended=no") + (f"unattended:\n  notify: telephone 12\n  fire_input: {fire}\n"
                                     f"  over_temperature_input: {heat}\n  reason_beyond: 8 h\n")
    told = check_text("b.yaml", text)
    assert [(f.grade, f.found) for f in told] == ([(REASON, words)] if words else [])
