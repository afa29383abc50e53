"""From the checked file to the frozen bench: straight lines, masks and derived numbers."""

from typing import Any

from hvhost.bench.archive import archive_of
from hvhost.bench.broker import broker_of
from hvhost.bench.document import (
    BenchFile,
    CurrentMonitorBlock,
    CurrentProgramBlock,
    MeasuredAt,
    Polarity,
    VoltageMonitorBlock,
    VoltageProgramBlock,
)
from hvhost.bench.instrument import instrument_of
from hvhost.bench.model import (
    ArcBounds,
    Bench,
    BenchLimits,
    Channel,
    GroundDevice,
    Port,
    Scale,
    SlowChannel,
    Unattended,
)
from hvhost.bench.saying import delay_samples
from hvhost.bench.service import service_of
from hvhost.bench.settings_from import fitted_mask
from hvhost.words.findings import Finding

COVERAGE = 2.0  # the file states expanded uncertainties (k = 2); inside they are standard ones


def program_scale(block: VoltageProgramBlock | CurrentProgramBlock) -> Scale:
    """V or A per word: full_scale / input * converter / code; words are unipolar."""
    last = (1 << block.bits) - 1
    gain = block.full_scale / block.input * block.converter / (block.converter_code or last)
    return Scale(gain=gain, zero=0.0, u_gain=block.gain_uncertainty / COVERAGE,
                 u_zero=block.zero_uncertainty / COVERAGE, code_low=0, code_high=last)


def monitor_scale(block: VoltageMonitorBlock | CurrentMonitorBlock) -> Scale:
    """V or A per monitor code: full_scale / output * converter / code, with the monitor's sign."""
    last = (1 << (block.bits - 1)) - 1 if block.signed else (1 << block.bits) - 1
    lowest = -last - 1 if block.signed else 0
    sign = 1 if block.sign is Polarity.POSITIVE else -1
    gain = sign * block.full_scale / block.output * block.converter / (block.converter_code or last)
    return Scale(gain=gain, zero=block.zero_code, u_gain=block.gain_uncertainty / COVERAGE,
                 u_zero=block.zero_uncertainty / COVERAGE, code_low=lowest, code_high=last)


def _limits(f: BenchFile) -> BenchLimits:
    lim = f.limits
    return BenchLimits(
        overcurrent_a=lim.overcurrent, overcurrent_level_a=lim.overcurrent_level,
        overcurrent_level_s=lim.overcurrent_time, overvoltage_v=lim.overvoltage, envelope_v=lim.envelope,
        drop_v=lim.collapse, drop_samples=lim.collapse_samples,
        delay_samples=delay_samples(f.supply.programming_delay, f.sampling.rate), persist=lim.persistence,
        missing_s=lim.missing_after, follow_fraction=lim.follow, deviation_v=lim.deviation,
        deviation_s=lim.deviation_time, gap_s=lim.gap)


def _fitted(f: BenchFile) -> int:
    return fitted_mask(
        means=frozenset(f.cut_path.means), read_backs=frozenset(f.cut_path.read_back),
        danger=f.danger_signal.input, danger_from_relay=f.danger_signal.dark_with_relay_open,
        emergency=f.interlock.emergency_input, ground=f.ground.device, arm_input=f.inputs.arm,
        auxiliary=f.inputs.auxiliary_supplies, polarity=f.inputs.polarity,
        monitor_powered=f.voltage.monitor.powered_after_cut,
        monitor_at_specimen=f.voltage.monitor.measured_at is MeasuredAt.SPECIMEN)


def _wiring(f: BenchFile) -> dict[str, Any]:
    grounded = f.ground.device is not GroundDevice.NONE
    return {
        "cut_path": frozenset(str(m) for m in f.cut_path.means),
        "read_backs": frozenset(str(m) for m in f.cut_path.read_back),
        "fitted": _fitted(f),
        "interlock_hardwired": f.interlock.hard_wired,
        "interlock_latches": f.interlock.latches_open,
        "inhibits_when_mcu_absent": f.cut_path.inhibits_without_mcu,
        "ground": f.ground.device,
        "discharge_ohm": (f.ground.resistor or 0.0) if grounded else 0.0,
        "discharge_j": (f.ground.energy or 0.0) if grounded else 0.0,
        "monitor_powered_after_cut": f.voltage.monitor.powered_after_cut,
        "monitor_at_specimen": f.voltage.monitor.measured_at is MeasuredAt.SPECIMEN,
        "arm_input": f.inputs.arm,
    }


def _supply(f: BenchFile) -> dict[str, Any]:
    return {
        "polarity": 1 if f.supply.polarity is Polarity.POSITIVE else -1,
        "rated_v": f.supply.voltage, "rated_a": f.supply.current,
        "v_max": f.ceilings.voltage, "i_max": f.ceilings.current,
        "slew_v_per_s": f.ceilings.slew, "slew_a_per_s": f.ceilings.current_slew,
        "longest_on_s": f.ceilings.longest_on,
        "down_slew_v_per_s": f.lower.slew, "lower_max_s": f.lower.longest, "warn_s": f.warning,
        "lease_s": f.lease.time, "lease_min_s": f.lease.shortest, "lease_max_s": f.lease.longest,
        "bleed_s": f.bleed.time, "bleeds": f.bleed.times, "zero_band_v": f.bleed.zero_band,
        "output_f": f.supply.output_capacitance, "cable_f": f.cable.capacitance,
        "tip_ohm": f.cable.resistor or 0.0, "touch_v": f.touch.threshold, "wet": f.touch.wet,
        "warm_up_s": f.supply.warm_up, "rate_hz": f.sampling.rate, "bandwidth_hz": f.sampling.bandwidth,
        "ripple_hz": f.supply.ripple_frequency, "ripple_v": f.supply.ripple,
    }


def _unattended(f: BenchFile) -> Unattended | None:
    block = f.unattended
    if f.attended or block is None:
        return None
    return Unattended(notify=block.notify, fire_input=block.fire_input,
                      over_temperature_input=block.over_temperature_input, reason_beyond_s=block.reason_beyond)


def bench_of(f: BenchFile, *, file: str, text: str, sha256: str, findings: tuple[Finding, ...]) -> Bench:
    """Build the bench of a file that has passed every check."""
    return Bench(
        name=f.bench, title=f.title, attended=f.attended, unattended=_unattended(f),
        voltage=Channel(program=program_scale(f.voltage.program), monitor=monitor_scale(f.voltage.monitor),
                        signed=f.voltage.monitor.signed),
        current=Channel(program=program_scale(f.current.program), monitor=monitor_scale(f.current.monitor),
                        signed=f.current.monitor.signed),
        limits=_limits(f),
        arcs=ArcBounds(count=f.arcs.count, rest_s=f.arcs.rest, window_s=f.arcs.window, total=f.arcs.total,
                       restrike_s=f.arcs.restrike),
        calibrated=f.calibration.certificate if f.calibration else None,
        calibration_valid_until=f.calibration.valid_until if f.calibration else None,
        port=Port(device=f.port.device, baud=f.port.baud), runs_folder=f.runs.folder,
        slow_channels=tuple(SlowChannel(name=c.name, kind=c.kind.value, address=c.address, query=c.query,
                                        every_s=c.every, uncertainty=c.uncertainty) for c in f.slow_channels),
        service=service_of(f.daemon), broker=broker_of(f.mqtt, f.bench), instrument=instrument_of(f.instrument),
        archive=archive_of(f.archive),
        file=file, text=text, sha256=sha256, findings=findings, **_supply(f), **_wiring(f))
