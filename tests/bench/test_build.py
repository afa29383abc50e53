"""From the file's blocks to the frozen bench."""

from pathlib import Path

import pytest

from hvhost.bench.build import monitor_scale, program_scale
from hvhost.bench.document import CurrentMonitorBlock, MeasuredAt, Polarity, VoltageMonitorBlock, VoltageProgramBlock
from hvhost.bench.file import bench_from
from hvhost.bench.model import GroundDevice

CONFIGS = Path(__file__).parents[2] / "configs"
DEMO = (CONFIGS / "demo.bench.yaml").read_text(encoding="utf-8")


def test_program_scale_by_hand() -> None:
    """10 V at the last code, 5 V at the input ask for 20 kV: the converter asks for up to 40 kV."""
    scale = program_scale(VoltageProgramBlock(bits=12, converter=10.0, input=5.0, full_scale=20e3,
                                              gain_uncertainty=0.01, zero_uncertainty=10.0))
    assert scale.value(4095) == pytest.approx(40e3, rel=1e-15)
    assert (scale.code_low, scale.code_high, scale.u_gain, scale.u_zero) == (0, 4095, 0.005, 5.0)


@pytest.mark.parametrize(("signed", "code", "zero", "sign", "raw", "value"), [
    (True, None, 0.0, Polarity.POSITIVE, 2047, 10e3), (False, None, 0.0, Polarity.POSITIVE, 4095, 10e3),
    (True, 2048, 0.0, Polarity.POSITIVE, 2047, 10e3 * 2047 / 2048), (True, None, 0.0, Polarity.NEGATIVE, -2047, 10e3),
    (False, 2000, 4000.0, Polarity.NEGATIVE, 2000, 10e3),
    (True, None, 10.5, Polarity.POSITIVE, 2047, 10e3 * 2036.5 / 2047)])
def test_monitor_scale_by_hand(signed: bool, code: int | None, zero: float, sign: Polarity, raw: int,
                               value: float) -> None:
    """Signed and unipolar converters, both conventions of full scale, shifted zero, falling signal."""
    scale = monitor_scale(VoltageMonitorBlock(
        bits=12, signed=signed, converter=10.0, converter_code=code, output=10.0, sign=sign, zero_code=zero,
        gain_uncertainty=0.01, full_scale=10e3, zero_uncertainty=4.0, measured_at=MeasuredAt.SPECIMEN,
        powered_after_cut=True))
    assert scale.value(raw) == pytest.approx(value, rel=1e-12)
    assert (scale.code_low, scale.code_high) == ((-2048, 2047) if signed else (0, 4095))
    assert scale.sign == (1 if sign is Polarity.POSITIVE else -1)


def test_current_monitor_scale() -> None:
    """10 V over a shunt of 1 kΩ are 10 mA."""
    scale = monitor_scale(CurrentMonitorBlock(bits=16, signed=True, converter=10.0, output=10.0, sign=Polarity.POSITIVE,
                                              gain_uncertainty=0.01, full_scale=10e-3, zero_uncertainty=1e-6))
    assert scale.value(32767) == pytest.approx(10e-3, rel=1e-15)


def test_ground_without_device_has_no_resistor() -> None:
    """Where there is no device the bench has neither resistor nor rating, and says why a reason is needed."""
    text = DEMO.replace("  device: stick                 # hangs on its hook contact while the bench is in use\n"
                        "  resistor: 100 kΩ\n  energy: 20 J\n", "  device: none\n")
    bench = bench_from("b.yaml", text)
    assert (bench.ground, bench.discharge_ohm, bench.discharge_j) == (GroundDevice.NONE, 0.0, 0.0)
    assert [f.what for f in bench.findings] == ["ground.device"]


def test_unattended_block_is_kept() -> None:
    """The contact to notify and the time beyond which a reason is due are in the bench."""
    text = DEMO.replace("attended: yes", "attended: no\nunattended:\n  notify: telephone 12\n  fire_input: yes\n"
                        "  over_temperature_input: yes\n  reason_beyond: 8 h")
    unattended = bench_from("b.yaml", text).unattended
    assert unattended is not None
    assert (unattended.notify, unattended.reason_beyond_s) == ("telephone 12", 28_800.0)


def test_slow_channels_are_kept() -> None:
    """Auxiliary instruments keep their address, query, period and stated uncertainty."""
    (channel,) = bench_from("b.yaml", DEMO + "slow_channels:\n  - name: room\n    kind: temperature\n"
                            "    address: tcp://192.0.2.7:5025\n    query: 'T?'\n    every: 10 s\n"
                            "    uncertainty: 0.5 °C\n").slow_channels
    assert (channel.name, channel.kind, channel.every_s, channel.uncertainty) == ("room", "temperature", 10.0, "0.5 °C")
