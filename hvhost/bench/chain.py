"""The measuring chain's arithmetic: divider, RC corner, converter steps."""

import math


def divider_ratio(upper_ohm: float, lower_ohm: float) -> float:
    """(R1 + R2) / R2: volts in per volt out, unloaded."""
    return (upper_ohm + lower_ohm) / lower_ohm


def lower_arm_ohm(upper_ohm: float, volts_in: float, volts_out: float) -> float:
    """R2 that gives ``volts_out`` at ``volts_in``: R1 Vout / (Vin - Vout)."""
    return upper_ohm * volts_out / (volts_in - volts_out)


def source_ohm(upper_ohm: float, lower_ohm: float) -> float:
    """Source resistance of the divider: R1 R2 / (R1 + R2)."""
    return upper_ohm * lower_ohm / (upper_ohm + lower_ohm)


def corner_hz(resistance_ohm: float, capacitance_f: float) -> float:
    """-3 dB frequency of one RC: 1 / (2 pi R C)."""
    return 1.0 / (2.0 * math.pi * resistance_ohm * capacitance_f)


def settling_s(tau_s: float, fraction: float) -> float:
    """Time after a step until one RC is within ``fraction`` of its end: tau ln(1 / fraction)."""
    return tau_s * math.log(1.0 / fraction)


def quantum(full_scale: float, bits: int) -> float:
    """One step of a converter with 2**bits steps over its full scale: FS / 2**N."""
    return float(full_scale / (1 << bits))


def quantisation_u(step: float) -> float:
    """Standard uncertainty of one rounding: q / sqrt 12 (rectangular distribution, JCGM 100 4.3.7)."""
    return step / math.sqrt(12.0)


def signal_to_noise_db(bits: int) -> float:
    """Ideal converter, full-scale sine: 6.02 N + 1.76 dB."""
    return 20.0 * bits * math.log10(2.0) + 10.0 * math.log10(1.5)
