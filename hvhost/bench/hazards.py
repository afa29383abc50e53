"""What the bench stores and how long it stays dangerous.

Limits: IEC 61010-1 (third edition) 6.3.1, normal condition: 60 V d.c. (35 V where wet); above it a capacitance may hold
45 µC up to 15 kV, 350 mJ above.  They are remembered figures of a standard, kept beside their tests.  No relief is
taken from a current limit that software or a knob sets.
"""

import math
from dataclasses import dataclass

TOUCH_V = 60.0
TOUCH_WET_V = 35.0
CHARGE_LIMIT_C = 45e-6
ENERGY_LIMIT_J = 0.350
CHARGE_RULE_TO_V = 15e3  # up to and including this voltage the charge rule holds, above it the energy rule


@dataclass(frozen=True, slots=True, kw_only=True)
class Stored:
    """What a capacitance at a voltage holds, and whether contact with it is dangerous."""

    capacitance_f: float
    voltage_v: float
    charge_c: float
    energy_j: float
    dangerous: bool
    rule: str


def touch_threshold_v(wet: bool) -> float:
    """Volts above which a part is hazardous live."""
    return TOUCH_WET_V if wet else TOUCH_V


def stored_charge_c(capacitance_f: float, voltage_v: float) -> float:
    """Q = C V."""
    return capacitance_f * abs(voltage_v)


def stored_energy_j(capacitance_f: float, voltage_v: float) -> float:
    """E = 1/2 C V^2."""
    return 0.5 * capacitance_f * voltage_v * voltage_v


def capacitance_limit_f(voltage_v: float) -> float:
    """The capacitance that just meets the charge rule (up to 15 kV) or the energy rule (above)."""
    volts = abs(voltage_v)
    if volts <= CHARGE_RULE_TO_V:
        return CHARGE_LIMIT_C / volts
    return 2.0 * ENERGY_LIMIT_J / (volts * volts)


def stored(capacitance_f: float, voltage_v: float, wet: bool = False) -> Stored:
    """Judge what is stored; at or below the touch threshold nothing is dangerous to touch."""
    charge_c, energy_j = stored_charge_c(capacitance_f, voltage_v), stored_energy_j(capacitance_f, voltage_v)
    if abs(voltage_v) <= touch_threshold_v(wet):
        dangerous, rule = False, f"at most {touch_threshold_v(wet):g} V"
    elif abs(voltage_v) <= CHARGE_RULE_TO_V:
        dangerous, rule = charge_c > CHARGE_LIMIT_C, "45 µC up to 15 kV"
    else:
        dangerous, rule = energy_j > ENERGY_LIMIT_J, "350 mJ above 15 kV"
    return Stored(capacitance_f=capacitance_f, voltage_v=voltage_v, charge_c=charge_c, energy_j=energy_j,
                  dangerous=dangerous, rule=rule)


def bleed_times_to(voltage_v: float, threshold_v: float) -> float:
    """Time constants from a voltage down to a threshold: ln(V0 / V); 0 where it is below already."""
    if abs(voltage_v) <= threshold_v:
        return 0.0
    return math.log(abs(voltage_v) / threshold_v)


def time_to_s(voltage_v: float, threshold_v: float, tau_s: float) -> float:
    """Seconds from a voltage down to a threshold through one time constant: t = tau ln(V0 / V)."""
    return tau_s * bleed_times_to(voltage_v, threshold_v)


def voltage_after_v(voltage_v: float, tau_s: float, t_s: float) -> float:
    """Volts left after a time: V = V0 exp(-t / tau)."""
    return voltage_v * math.exp(-t_s / tau_s)


def charging_current_a(capacitance_f: float, slew_v_per_s: float) -> float:
    """What a load draws while the voltage rises: I = C dV/dt."""
    return capacitance_f * slew_v_per_s
