"""From the bench file to the MCU's settings in codes, and the comparison of both.

Rounding keeps to the safe side: ceilings, slews and limits round down, waiting times and the zero band round up.
"""

import math

from hvhost.bench.model import Bench, CutMeans, GroundDevice
from hvhost.bench.scaling import Scale
from hvhost.wire.settings import BY_KEY, KEYS, Settings
from hvhost.wire.vocabulary import Fitted
from hvhost.words.findings import Finding, Grade
from hvhost.words.quantities import Dimension, format_quantity

Q16 = 65_536
COVERAGE = 2.0  # k for 95 %: what a calibration allows is its expanded uncertainty
EPSILON = 1e-9  # relative; a quotient that should be whole must not round to its neighbour


def _down(value: float) -> int:
    return math.floor(value + abs(value) * EPSILON)


def _up(value: float) -> int:
    return math.ceil(value - abs(value) * EPSILON)


def _word_ceiling(scale: Scale, value: float) -> int:
    """The highest word that does not ask for more than ``value``."""
    return min(_down(value / scale.gain + scale.zero), scale.code_high)


def _above(scale: Scale, value: float) -> int:
    """A limit in monitor codes above zero, at most the converter's reach."""
    return min(max(1, _down(value / scale.quantum)), 65_535)


def _band(scale: Scale, value: float) -> int:
    return min(max(1, _up(value / scale.quantum)), 65_535)


def settings_of(bench: Bench) -> Settings:
    """Every setting of the table for this bench; raises WireFault where a value leaves its range."""
    return Settings.of({**_scaling(bench), **_times(bench), **_limits(bench), **_arcs(bench), "fitted": bench.fitted})


def _scaling(bench: Bench) -> dict[str, int]:
    volts, amps = bench.voltage, bench.current
    return {
        "vmax": _word_ceiling(volts.program, bench.v_max),
        "imax": _word_ceiling(amps.program, bench.i_max),
        "vslew": max(1, _down(bench.slew_v_per_s / volts.program.quantum)),
        "islew": max(1, _down(bench.slew_a_per_s / amps.program.quantum)),
        "downslew": max(1, _down(bench.down_slew_v_per_s / volts.program.quantum)),
        "vfull": round(volts.program.value(volts.program.code_high)),
        "ifull": round(amps.program.value(amps.program.code_high) * 1e6),
        "polarity": bench.polarity,
        "vmap": round(volts.monitor_per_word * Q16),
        "vzero": volts.monitor.code_zero,
        "imap": round(amps.monitor_per_word * Q16),
        "izero": amps.monitor.code_zero,
        "zeroband": _band(volts.monitor, bench.zero_band_v),
    }


def _times(bench: Bench) -> dict[str, int]:
    return {
        "lowermax": _down(bench.lower_max_s * 1e3),
        "warn": _up(bench.warn_s * 1e3),
        "bleed": _up(bench.bleed_s * 1e3),
        "bleeds": bench.bleeds,
        "longest": _down(bench.longest_on_s),
        "leasemin": _up(bench.lease_min_s * 1e3),
        "leasemax": _down(bench.lease_max_s * 1e3),
    }


def _limits(bench: Bench) -> dict[str, int]:
    limits, volts, amps = bench.limits, bench.voltage.monitor, bench.current.monitor
    return {
        "oc": _above(amps, limits.overcurrent_a),
        "ocl": _above(amps, limits.overcurrent_level_a),
        "oclms": _down(limits.overcurrent_level_s * 1e3),
        "ov": _above(volts, limits.overvoltage_v),
        "env": _above(volts, limits.envelope_v),
        "drop": _above(volts, limits.drop_v),
        "span": limits.drop_samples,
        "delay": limits.delay_samples,
        "persist": limits.persist,
        "missms": _down(limits.missing_s * 1e3),
    }


def _arcs(bench: Bench) -> dict[str, int]:
    arcs = bench.arcs
    return {
        "arccount": arcs.count,
        "arcrest": _up(arcs.rest_s * 1e3),
        "arcwindow": _up(arcs.window_s * 1e3),
        "arctotal": arcs.total,
        "restrike": _down(arcs.restrike_s * 1e3),
    }


def fitted_mask(*, means: frozenset[str], read_backs: frozenset[str], danger: bool, danger_from_relay: bool,
                emergency: bool, ground: GroundDevice, arm_input: bool, auxiliary: bool, polarity: bool,
                monitor_powered: bool, monitor_at_specimen: bool) -> int:
    """The mask of outputs, read-backs and inputs that exist."""
    present = {
        Fitted.INHIBIT: CutMeans.INHIBIT in means,
        Fitted.CLEAR: CutMeans.CLEAR in means,
        Fitted.RELAY: CutMeans.RELAY in means,
        Fitted.INHIBIT_BACK: CutMeans.INHIBIT in read_backs,
        Fitted.RELAY_BACK: CutMeans.RELAY in read_backs,
        Fitted.DANGER: danger,
        Fitted.EMERGENCY: emergency,
        Fitted.GROUND_SWITCH: ground is GroundDevice.SWITCH,
        Fitted.GROUND_STICK: ground is GroundDevice.STICK,
        Fitted.ARM_INPUT: arm_input,
        Fitted.AUXILIARY: auxiliary,
        Fitted.POLARITY: polarity,
        Fitted.MONITOR_POWERED: monitor_powered,
        Fitted.MONITOR_AT_SPECIMEN: monitor_at_specimen,
        Fitted.DANGER_FROM_RELAY: danger and danger_from_relay,
    }
    return sum(int(bit) for bit, there in present.items() if there)


# Which scale turns a setting's codes into SI, and how it is printed.
_VOLT_WORDS, _AMP_WORDS = {"vmax"}, {"imax"}
_VOLT_RATES, _AMP_RATES = {"vslew", "downslew"}, {"islew"}
_VOLT_CODES, _AMP_CODES = {"zeroband", "ov", "env", "drop"}, {"oc", "ocl"}
_MILLISECONDS = {key for key in KEYS if BY_KEY[key].unit == "ms"}


def in_si(bench: Bench, key: str, value: int) -> str:
    """A setting's value in SI units where it has any, '' where it is a plain number."""
    volts, amps = bench.voltage, bench.current
    if key in _VOLT_WORDS:
        return format_quantity(volts.program.value(value), Dimension.VOLT, 5)
    if key in _AMP_WORDS:
        return format_quantity(amps.program.value(value), Dimension.AMP, 5)
    if key in _VOLT_RATES:
        return format_quantity(value * volts.program.quantum, Dimension.VOLT_PER_SECOND, 5)
    if key in _AMP_RATES:
        return format_quantity(value * amps.program.quantum, Dimension.AMP_PER_SECOND, 5)
    if key in _VOLT_CODES:
        return format_quantity(value * volts.monitor.quantum, Dimension.VOLT, 5)
    if key in _AMP_CODES:
        return format_quantity(value * amps.monitor.quantum, Dimension.AMP, 5)
    if key in _MILLISECONDS:
        return format_quantity(value / 1e3, Dimension.SECOND, 6)
    if key == "longest":
        return format_quantity(float(value), Dimension.SECOND, 8)
    if key == "vfull":
        return format_quantity(float(value), Dimension.VOLT, 7)
    if key == "ifull":
        return format_quantity(value / 1e6, Dimension.AMP, 7)
    return ""


def shown_setting(bench: Bench, key: str, value: int) -> str:
    """A setting as messages show it: SI first, then the code: '25 kV (65535 code)'."""
    unit = BY_KEY[key].unit
    if key == "fitted":
        names = [bit.name.lower().replace("_", " ") for bit in Fitted if value & bit and bit.name]
        return f"{', '.join(names) or 'nothing'} (0x{value:X})"
    code = f"{value} {unit}".rstrip()
    si = in_si(bench, key, value)
    return f"{si} ({code})" if si and si != code else code


def allowance(bench: Bench, key: str) -> int:
    """By how many units a setting may differ: what the calibration allows (95 %), in the setting's own unit.

    Only what describes the chain has an allowance; limits, times, counts and fittings must agree exactly.  The map
    may differ by the expanded uncertainties of program and monitor gain together, a zero by its own.
    """
    volts, amps = bench.voltage, bench.current
    if key in ("vmap", "imap"):
        channel = volts if key == "vmap" else amps
        relative = COVERAGE * math.hypot(channel.program.u_gain, channel.monitor.u_gain)
        return math.ceil(abs(channel.monitor_per_word) * Q16 * relative)
    if key in ("vzero", "izero"):
        monitor = volts.monitor if key == "vzero" else amps.monitor
        return math.ceil(COVERAGE * monitor.u_zero / monitor.quantum)
    return 0


def compare_settings(bench: Bench, settings: Settings) -> tuple[Finding, ...]:
    """A finding for each setting in the MCU that differs from the bench file by more than the calibration allows."""
    wanted = settings_of(bench)
    findings = []
    for key, here, there in zip(KEYS, wanted.values, settings.values, strict=True):
        if abs(here - there) > allowance(bench, key):
            findings.append(Finding(
                grade=Grade.REFUSE, file=bench.file, line=0, what=f"MCU setting {key} ({BY_KEY[key].meaning})",
                expected=shown_setting(bench, key, here), found=shown_setting(bench, key, there),
                remedy="commission the bench or mend the file; until then: observe only"))
    return tuple(findings)
