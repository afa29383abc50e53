"""The bench file as the MCU's settings, and the comparison that decides between arming and observing."""

from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.bench.file import bench_from, load_bench
from hvhost.bench.model import Bench, GroundDevice
from hvhost.bench.settings_from import (
    allowance,
    compare_settings,
    fitted_mask,
    in_si,
    settings_of,
    shown_setting,
)
from hvhost.wire.settings import BY_KEY, KEYS, TIGHTENABLE
from hvhost.wire.vocabulary import Fitted

CONFIGS = Path(__file__).parents[2] / "configs"
DEMO = load_bench(CONFIGS / "demo.bench.yaml")
SMALL = load_bench(CONFIGS / "small.bench.yaml")
TEXT = DEMO.text


def _demo(*changes: tuple[str, str]) -> Bench:
    text = TEXT
    for old, new in changes:
        assert old in text
        text = text.replace(old, new, 1)
    return bench_from("b.yaml", text)


def test_demo_in_codes() -> None:
    """Codes worked out by hand: 25 kV is word 65535 and monitor code 32767; ceilings round down, the zero band up."""
    s = settings_of(DEMO)
    assert s["vmax"] == 62913, "24 / 25 of 65535 is 62913.6"
    assert s["imax"] == 65535
    assert s["vslew"] == 13107, "5 kV/s over 25 kV: a fifth of 65535 per second"
    assert s["islew"] == 655350, "40 mA/s over 4 mA"
    assert s["downslew"] == 13107
    assert (s["vfull"], s["ifull"], s["polarity"]) == (25_000, 4_000, 1)
    assert s["vmap"] == 32767, "32767 monitor codes for 65535 words, times 65536, nearest"
    assert s["imap"] == 13107, "4 mA of 10 mA"
    assert (s["vzero"], s["izero"]) == (0, 0)
    assert s["zeroband"] == 66, "50 V are 65.5 codes"
    assert s["ov"] == 32504, "24.8 kV are 32504.9 codes"
    assert s["oc"] == 16383, "5 mA are 16383.5 codes"
    assert s["drop"] == s["env"] == 1310
    assert (s["span"], s["delay"], s["persist"]) == (4, 11, 2)
    assert (s["warn"], s["lowermax"], s["bleed"], s["bleeds"], s["longest"]) == (3000, 10_000, 2000, 8, 14_400)
    assert (s["leasemin"], s["leasemax"]) == (100, 2000)
    assert (s["arccount"], s["arcrest"], s["arcwindow"], s["arctotal"], s["restrike"]) == (50, 500, 60_000, 500, 20)
    assert s["missms"] == 200


def test_small_in_codes() -> None:
    """12-bit converters, negative output, a monitor that gives the magnitude: the map stays positive."""
    s = settings_of(SMALL)
    assert (s["vmax"], s["imax"]) == (3931, 3685)
    assert s["polarity"] == -1
    assert s["vmap"] == round(65536 * 5.0 / 5.01)
    assert not s["fitted"] & Fitted.ARM_INPUT
    assert not s["fitted"] & Fitted.CLEAR
    assert s["fitted"] & Fitted.GROUND_SWITCH


def test_falling_monitor_gives_a_negative_map() -> None:
    """A monitor whose codes fall as the output rises: vmap negative, limits still positive codes above zero."""
    bench = _demo(("polarity: positive", "polarity: negative"),
                  ("    sign: positive\n    zero_code: 0\n    gain_uncertainty: 0.6 %",
                   "    sign: negative\n    zero_code: -7\n    gain_uncertainty: 0.6 %"))
    s = settings_of(bench)
    assert s["vmap"] == -32767
    assert s["vzero"] == -7
    assert s["polarity"] == -1
    assert s["ov"] == settings_of(DEMO)["ov"]


@given(st.floats(0.5, 24.0), st.floats(0.05, 4.0), st.floats(0.01, 20.0))
def test_no_code_asks_for_more_than_the_file_allows(kilovolts: float, milliamps: float, slew: float) -> None:
    """Whatever the ceiling, its code is at most the ceiling and less than one code below it (S2)."""
    bench = _demo(("voltage: 24 kV  ", f"voltage: {kilovolts:.6f} kV  "),
                  ("current: 4 mA\n  slew", f"current: {milliamps:.6f} mA\n  slew"),
                  ("slew: 5 kV/s\n  current_slew", f"slew: {slew:.6f} kV/s\n  current_slew"),
                  ("collapse: 1 kV", "collapse: 100 V"), ("zero_band: 50 V", "zero_band: 10 V"))
    s = settings_of(bench)
    program, amps = bench.voltage.program, bench.current.program
    assert program.value(s["vmax"]) <= bench.v_max * (1 + 1e-8)
    assert program.value(s["vmax"] + 1) > bench.v_max * (1 - 1e-8)
    assert amps.value(s["imax"]) <= bench.i_max * (1 + 1e-8)
    assert s["vslew"] * program.quantum <= bench.slew_v_per_s * (1 + 1e-8)


def test_every_fitting_has_its_bit() -> None:
    """Each thing that exists sets one bit and no other."""
    none = {"means": frozenset[str](), "read_backs": frozenset[str](), "danger": False, "danger_from_relay": False,
            "emergency": False, "ground": GroundDevice.NONE, "arm_input": False, "auxiliary": False,
            "polarity": False, "monitor_powered": False, "monitor_at_specimen": False}
    assert fitted_mask(**none) == 0  # type: ignore[arg-type]
    one = [({"means": frozenset({"relay"})}, Fitted.RELAY), ({"means": frozenset({"inhibit"})}, Fitted.INHIBIT),
           ({"means": frozenset({"clear"})}, Fitted.CLEAR), ({"means": frozenset({"programming"})}, 0),
           ({"read_backs": frozenset({"relay"})}, Fitted.RELAY_BACK),
           ({"read_backs": frozenset({"inhibit"})}, Fitted.INHIBIT_BACK), ({"danger": True}, Fitted.DANGER),
           ({"danger_from_relay": True}, 0), ({"emergency": True}, Fitted.EMERGENCY),
           ({"ground": GroundDevice.STICK}, Fitted.GROUND_STICK),
           ({"ground": GroundDevice.SWITCH}, Fitted.GROUND_SWITCH),
           ({"arm_input": True}, Fitted.ARM_INPUT), ({"auxiliary": True}, Fitted.AUXILIARY),
           ({"polarity": True}, Fitted.POLARITY), ({"monitor_powered": True}, Fitted.MONITOR_POWERED),
           ({"monitor_at_specimen": True}, Fitted.MONITOR_AT_SPECIMEN)]
    for change, bit in one:
        assert fitted_mask(**{**none, **change}) == int(bit), change  # type: ignore[arg-type]
    both = fitted_mask(**{**none, "danger": True, "danger_from_relay": True})  # type: ignore[arg-type]
    assert both == Fitted.DANGER | Fitted.DANGER_FROM_RELAY


@pytest.mark.parametrize("bench", [DEMO, SMALL], ids=["demo", "small"])
def test_equal_settings_have_no_findings(bench: Bench) -> None:
    """Settings written from the file agree with the file."""
    assert compare_settings(bench, bench.settings()) == ()


@pytest.mark.parametrize("bench", [DEMO, SMALL], ids=["demo", "small"])
@pytest.mark.parametrize("key", [k for k in KEYS if k not in ("vmap", "imap", "vzero", "izero", "polarity")])
def test_one_step_beside_the_file_is_told(bench: Bench, key: str) -> None:
    """Whatever is no property of the chain must agree exactly; the finding names both values, in SI and in codes."""
    here = bench.settings()
    setting = BY_KEY[key]
    other = here[key] - 1 if here[key] > setting.low else here[key] + 1
    (finding,) = compare_settings(bench, here.with_(**{key: other}))
    assert key in finding.what
    assert finding.grade.value == "refuse"
    if key != "fitted":
        assert str(here[key]) in finding.expected
        assert str(other) in finding.found
    if key in TIGHTENABLE and setting.unit in ("code", "code/s", "ms"):
        assert finding.expected.split()[1][0] in "mkVAsµ", "SI value first"


@pytest.mark.parametrize("key", ["vmap", "imap", "vzero", "izero"])
def test_chain_may_differ_by_the_calibrations_allowance(key: str) -> None:
    """Map and zero may differ by the expanded uncertainty, and by no step more."""
    here = DEMO.settings()
    allowed = allowance(DEMO, key)
    assert allowed > 0
    assert compare_settings(DEMO, here.with_(**{key: here[key] + allowed})) == ()
    assert compare_settings(DEMO, here.with_(**{key: here[key] - allowed})) == ()
    assert len(compare_settings(DEMO, here.with_(**{key: here[key] + allowed + 1}))) == 1


def test_size_of_the_allowance() -> None:
    """0.5 % of the program and 0.6 % of the monitor, k = 2, in quadrature: 0.78 % of the map."""
    assert allowance(DEMO, "vmap") == pytest.approx(32767 * 0.00781, rel=2e-3)
    assert allowance(DEMO, "vzero") == 14, "10 V are 13.1 codes"
    assert allowance(DEMO, "ov") == 0


def test_wrong_polarity_is_told() -> None:
    """Another polarity in the MCU is named."""
    (finding,) = compare_settings(DEMO, DEMO.settings().with_(polarity=-1))
    assert "polarity" in finding.what
    assert (finding.expected, finding.found) == ("1 sign", "-1 sign")


@pytest.mark.parametrize(("key", "value", "text"), [
    ("vmax", 65535, "25 kV"), ("imax", 65535, "4 mA"), ("vslew", 13107, "5 kV/s"), ("islew", 65535, "4 mA/s"),
    ("ov", 32767, "25 kV"), ("oc", 32767, "10 mA"), ("warn", 3000, "3 s"), ("longest", 60, "60 s"),
    ("vfull", 25000, "25 kV"), ("ifull", 4000, "4 mA"), ("bleeds", 5, ""), ("vmap", 1, "")])
def test_settings_in_si(key: str, value: int, text: str) -> None:
    """Codes are shown in volts, amps and seconds where they stand for any."""
    assert in_si(DEMO, key, value) == text
    assert shown_setting(DEMO, key, value).startswith(text or str(value))


def test_fittings_are_shown_by_name() -> None:
    """A mask is shown as words."""
    assert shown_setting(DEMO, "fitted", int(Fitted.RELAY | Fitted.DANGER)) == "relay, danger (0x24)"
    assert shown_setting(DEMO, "fitted", 0) == "nothing (0x0)"
