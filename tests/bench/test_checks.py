"""Checks across keys, each on both sides of its bound, and beside other faults of the file."""

from datetime import date
from pathlib import Path

import pytest

from hvhost.bench.checks import CHECKS, date_findings, delay_samples
from hvhost.bench.file import check_text
from hvhost.words.findings import Finding, Grade

DEMO = (Path(__file__).parents[2] / "configs" / "demo.bench.yaml").read_text(encoding="utf-8")
REFUSE, REASON, NOTE = Grade.REFUSE, Grade.REASON, Grade.NOTE


def changed(*changes: str) -> str:
    """The demo bench with ``block.key=value`` changes; ``=`` alone drops the line, a key that is not there is added."""
    lines = DEMO.split("\n")
    for change in changes:
        place, _, value = change.partition("=")
        parts = place.split(".")
        at = -1
        for depth, part in enumerate(parts):
            head = "  " * depth + part + ":"
            found = next((n for n in range(at + 1, len(lines)) if lines[n].startswith(head)), None)
            if found is None:
                lines.insert(at + 1, head)
                found = at + 1
            at = found
        lines[at] = f"{lines[at].partition(':')[0]}: {value}" if value else ""
    return "\n".join(lines)


def findings(*changes: str) -> tuple[Finding, ...]:
    """What checking the changed demo bench says."""
    return check_text("b.yaml", changed(*changes))


SIDES = [
    # (changes that are fine), (changes that are not), grade, key
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
    (("cut_path.read_back=[inhibit]", "cut_path.means=[inhibit]"), ("cut_path.means=[inhibit]",), REFUSE,
     "cut_path.read_back"),
    (("ceilings.voltage=24.7 kV",), ("ceilings.voltage=24.7 kV", "supply.voltage=24.6 kV"), REFUSE, "ceilings.voltage"),
    (("ceilings.current=4 mA",), ("ceilings.current=4.01 mA",), REFUSE, "ceilings.current"),
    (("lower.longest=4.8 s",), ("lower.longest=4.7 s",), NOTE, "lower.longest"),
    (("lease.time=100 ms",), ("lease.time=150 ms", "lease.shortest=160 ms"), REFUSE, "lease.time"),
    (("lease.shortest=500 ms", "lease.longest=500 ms"), ("lease.shortest=500 ms", "lease.longest=400 ms"), REFUSE,
     "lease.shortest"),
    (("voltage.program.converter=9.6 V",), ("voltage.program.converter=9.5 V",), REFUSE, "voltage.program.converter"),
    (("current.program.converter=10 V",), ("current.program.converter=9.9 V",), REFUSE, "current.program.converter"),
    (("limits.overvoltage=24.999 kV",), ("limits.overvoltage=25 kV",), REFUSE, "limits.overvoltage"),
    (("limits.overvoltage=24.1 kV",), ("limits.overvoltage=24 kV",), REFUSE, "limits.overvoltage"),
    (("limits.overcurrent=9.99 mA",), ("limits.overcurrent=10 mA",), REFUSE, "limits.overcurrent"),
    (("limits.overcurrent_level=5 mA",), ("limits.overcurrent_level=5.1 mA",), REFUSE, "limits.overcurrent_level"),
    (("limits.collapse=11 V",), ("limits.collapse=10 V",), REFUSE, "limits.collapse"),
    (("limits.collapse=23 kV",), ("limits.collapse=24 kV",), REFUSE, "limits.collapse"),
    (("supply.programming_delay=63 ms",), ("supply.programming_delay=64 ms",), REFUSE, "supply.programming_delay"),
    (("limits.missing_after=3 ms",), ("limits.missing_after=2.9 ms",), REFUSE, "limits.missing_after"),
    (("bleed.zero_band=10 V",), ("bleed.zero_band=9 V",), REFUSE, "bleed.zero_band"),
    (("bleed.zero_band=1.2 kV",), ("bleed.zero_band=1.3 kV",), REFUSE, "bleed.zero_band"),
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


@pytest.mark.parametrize(("fine", "faulty", "grade", "key"), SIDES, ids=lambda v: "+".join(v) if isinstance(v, tuple)
                         else str(v))
def test_both_sides(fine: tuple[str, ...], faulty: tuple[str, ...], grade: Grade, key: str) -> None:
    """On this side of the bound nothing is said, on the other exactly this key at its line."""
    assert [f.text for f in findings(*fine)] == []
    told = findings(*faulty)
    assert [(f.grade, f.what) for f in told] == [(grade, key)], [f.text for f in told]
    name = key.split(".")[-1]
    assert changed(*faulty).split("\n")[told[0].line - 1].strip().startswith(f"{name}:")


def test_interlock_by_software_is_allowed_below_the_touch_threshold() -> None:
    """S0 speaks of what can hurt: at 50 V the wiring of the loop is no fault."""
    low = ("supply.voltage=50 V", "ceilings.voltage=50 V", "voltage.program.full_scale=50 V",
           "voltage.monitor.full_scale=60 V", "limits.overvoltage=55 V", "limits.collapse=11 V", "bleed.zero_band=1 V",
           "voltage.monitor.zero_uncertainty=1 V", "supply.ripple=1 V", "ceilings.slew=5 V/s", "lower.slew=10 V/s",
           "interlock.hard_wired=no", "interlock.emergency_hard_wired=no", "danger_signal.fed_from=other")
    assert [f.text for f in findings(*low)] == []


def test_programming_alone_is_graded() -> None:
    """A cut that only programs zero needs a reason, and cannot pause."""
    told = findings("cut_path.means=[programming]", "cut_path.read_back=[]", "arcs.count=0", "arcs.total=0")
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


def test_a_fault_ends_only_the_checks_that_need_its_value() -> None:
    """One typing error does not hide the missing interlock."""
    told = findings("supply.voltage=25 KV", "interlock.hard_wired=no", "ground.energy=1 mJ", "bleed.times=5")
    assert [f.what for f in told] == ["supply.voltage", "interlock.hard_wired", "ground.energy", "bleed.times"]
    told = findings("ceilings.voltage=24", "interlock.hard_wired=no", "limits.overcurrent_level=6 mA")
    assert [f.what for f in told] == ["ceilings.voltage", "limits.overcurrent_level"], "is 24 dangerous?"


@pytest.mark.parametrize(("delay", "rate", "samples"), [(0.0, 1000.0, 1), (0.010, 1000.0, 11), (0.0101, 1000.0, 12),
                                                        (0.063, 1000.0, 64), (0.001, 100.0, 2)])
def test_delay_in_samples(delay: float, rate: float, samples: int) -> None:
    """The delay rounded up to samples, and one more since sampling has its own phase."""
    assert delay_samples(delay, rate) == samples


def test_days_around_the_last_day() -> None:
    """No calibration gives no finding about days; the day itself is still valid."""
    assert date_findings(None, date(2027, 1, 1), "f", 3) == ()
    assert date_findings(date(2027, 6, 1), date(2027, 5, 1), "f", 3) == ()
    assert [f.grade for f in date_findings(date(2027, 6, 1), date(2027, 5, 2), "f", 3)] == [NOTE]
    assert [f.grade for f in date_findings(date(2027, 6, 1), date(2027, 6, 1), "f", 3)] == [NOTE]
    assert [(f.grade, f.line) for f in date_findings(date(2027, 6, 1), date(2027, 6, 2), "f", 3)] == [(REASON, 3)]


def test_every_check_has_a_sentence() -> None:
    """Each check says in its first line what it holds."""
    for check in CHECKS:
        assert (check.__doc__ or "").strip().endswith(".")
