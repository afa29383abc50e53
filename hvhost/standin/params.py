"""What the simulated plant is made of: one frozen table per part, presets, and `key=value` changes.

SI units inside.  `demo` and `small` match the two example bench files; `gap` is `demo` with another specimen.
"""

from collections.abc import Iterable
from dataclasses import dataclass, field, fields, is_dataclass, replace
from difflib import get_close_matches
from typing import Any

from hvhost.words.errors import QuantityFault, UsageFault
from hvhost.words.quantities import Dimension, parse_quantity


@dataclass(frozen=True, slots=True, kw_only=True)
class Dac:
    """A unipolar converter that drives one programming input: code 0 is 0 V, the last code is ``full_v``."""

    bits: int
    full_v: float = 10.0

    @property
    def volts_per_code(self) -> float:
        """Volts at the programming input per code."""
        return self.full_v / ((1 << self.bits) - 1)


@dataclass(frozen=True, slots=True, kw_only=True)
class SupplyParams:
    """The bench supply: ``v_full`` and ``i_full`` are what ``program_full_v`` at the programming inputs asks for."""

    v_full: float
    i_full: float
    program_full_v: float = 10.0
    program_tau_s: float = 2e-3  # RC of the programming inputs: the delay before the output follows
    slew_v_per_s: float = 60e3  # fastest rise of the supply's own reference
    output_f: float = 1.0e-9
    bleed_ohm: float = 1.0e9
    ripple_hz: float = 100.0
    ripple_v: float = 0.5  # amplitude at no load
    ripple_v_per_a: float = 1.1e3  # more with load
    inhibit_s: float = 0.2e-3  # from the inhibit line to the output stage
    clear_input: bool = True
    clear_tau_s: float = 0.2e-3  # the clear input discharges the programming filter this fast


@dataclass(frozen=True, slots=True, kw_only=True)
class Adc:
    """One monitor converter: codes from ``low`` to ``high``, ``codes_per_v`` of the signal at its pin."""

    bits: int
    signed: bool
    full_v: float = 10.0
    offset_code: float = 0.0  # code that the bench's own zero gives (levels shifted for a unipolar converter)
    noise_lsb: float = 0.7  # standard deviation

    @property
    def low(self) -> int:
        """Lowest code."""
        return -(1 << (self.bits - 1)) if self.signed else 0

    @property
    def high(self) -> int:
        """Highest code."""
        return (1 << (self.bits - 1)) - 1 if self.signed else (1 << self.bits) - 1

    @property
    def codes_per_v(self) -> float:
        """Codes per volt: ``full_v`` is the highest code."""
        return self.high / self.full_v


@dataclass(frozen=True, slots=True, kw_only=True)
class ChainParams:
    """The measuring chain: divider and shunt, their RC filters, clamp, errors and converters."""

    polarity: int  # +1 or -1: sign of the output against ground
    v_sign: int  # sign of the monitor signal for that output
    i_sign: int
    high_ohm: float  # divider, upper arm
    low_ohm: float  # divider, lower arm
    low_f: float  # capacitor across the lower arm
    buffer_gain: float = 1.0  # amplifier behind the divider
    shunt_ohm: float = 1e3
    shunt_gain: float = 1.0
    shunt_tau_s: float = 0.3e-3
    clamp_v: float = 11.0
    v_gain_error: float = 0.0
    i_gain_error: float = 0.0
    v_offset_v: float = 0.0  # at the converter's pin
    i_offset_v: float = 0.0
    v_adc: Adc
    i_adc: Adc
    at_specimen: bool = False  # behind the tip resistor
    powered_after_cut: bool = True

    @property
    def ratio(self) -> float:
        """Divider ratio (R1 + R2) / R2."""
        return (self.high_ohm + self.low_ohm) / self.low_ohm

    @property
    def tau_s(self) -> float:
        """tau = (R1 || R2) C."""
        return self.high_ohm * self.low_ohm / (self.high_ohm + self.low_ohm) * self.low_f


@dataclass(frozen=True, slots=True, kw_only=True)
class SpecimenParams:
    """The specimen: capacitance, insulation, absorption branches (R, C), and how it breaks down."""

    capacitance_f: float = 0.5e-9
    insulation_ohm: float = 2e9
    branches: tuple[tuple[float, float], ...] = ((10e9, 0.1e-9), (60e9, 0.15e-9), (300e9, 0.2e-9))
    strength_v: float = 17.5e3  # scale of the Weibull distribution of the breakdown voltage
    strength_shape: float = 25.0
    strength_least_v: float = 0.0  # the distribution's location: nothing breaks down below
    lag_s: float = 0.5  # mean statistical lag at exactly the drawn strength
    lag_exponent: float = 60.0  # the lag falls with (V / strength) to this power
    self_restoring: bool = False
    recovery_s: float = 20e-3  # a gap's strength comes back with this time constant
    arc_v: float = 60.0  # burning voltage
    hold_a: float = 0.8e-3  # below this current an arc goes out
    quench_s: float = 0.1e-3  # mean time it takes to go out
    punctured_ohm: float = 2e6  # insulation after a puncture
    punctured_strength: float = 0.05  # part of the strength that a puncture leaves


@dataclass(frozen=True, slots=True, kw_only=True)
class ContactParams:
    """Relay, hard-wired contactor, arm input and what the wiring has."""

    relay_operate_s: float = 8e-3
    relay_release_s: float = 5e-3
    contactor_release_s: float = 20e-3
    bounce_s: float = 3e-3
    interlock_latches: bool = True
    arm_input: bool = True
    relay: bool = True  # without one the supply has power as long as the contactor is closed
    inhibit: bool = True  # without one the output stage knows the words only
    ground_ohm: float = 100e3  # resistor of the grounding device
    auxiliary_back_s: float = 50e-3


@dataclass(frozen=True, slots=True, kw_only=True)
class PlantParams:
    """The whole plant."""

    name: str
    v_dac: Dac
    i_dac: Dac
    supply: SupplyParams
    chain: ChainParams
    cable_f: float = 0.5e-9
    tip_ohm: float = 20e3
    specimen: SpecimenParams = field(default_factory=SpecimenParams)
    contacts: ContactParams = field(default_factory=ContactParams)
    panel_v: float = 1e9  # front panel's own set-points; the lower of panel and programming wins
    panel_a: float = 1e9


def demo() -> PlantParams:
    """0-25 kV, 4 mA, positive, 16-bit signed monitors, 10 V at 25 kV and at 10 mA; measured at the specimen."""
    return PlantParams(
        name="demo", v_dac=Dac(bits=16), i_dac=Dac(bits=16),
        supply=SupplyParams(v_full=25e3, i_full=4e-3),
        # 25 kV -> 10 V: R2 = R1 / (25e3 / 10 - 1)
        chain=ChainParams(polarity=1, v_sign=1, i_sign=1, high_ohm=1e9, low_ohm=1e9 / 2499.0, low_f=2.2e-9,
                          at_specimen=True, v_adc=Adc(bits=16, signed=True), i_adc=Adc(bits=16, signed=True)))


def small() -> PlantParams:
    """0-5 kV, 20 mA, negative, 12-bit unipolar converters, no arm input, no clear input."""
    return PlantParams(
        name="small", v_dac=Dac(bits=12), i_dac=Dac(bits=12),
        supply=SupplyParams(v_full=5e3, i_full=20e-3, slew_v_per_s=20e3, output_f=5e-9, bleed_ohm=95.2e6,
                            ripple_v=1.0, ripple_v_per_a=700.0, clear_input=False),
        chain=ChainParams(polarity=-1, v_sign=1, i_sign=1, high_ohm=500e6, low_ohm=1e6, low_f=1e-9, shunt_ohm=500.0,
                          at_specimen=True, v_adc=Adc(bits=12, signed=False), i_adc=Adc(bits=12, signed=False)),
        specimen=SpecimenParams(capacitance_f=2e-9, insulation_ohm=50e6, strength_v=4.6e3, hold_a=2e-3,
                                branches=((250e6, 4e-9), (1.5e9, 6e-9), (7.5e9, 8e-9))),
        contacts=ContactParams(arm_input=False))


def gap() -> PlantParams:
    """The demo bench with a sphere gap in air instead of a solid: it recovers after every breakdown."""
    return replace(demo(), name="gap", specimen=SpecimenParams(
        capacitance_f=40e-12, insulation_ohm=10e12, branches=(), strength_v=16e3, strength_shape=40.0, lag_s=0.1,
        self_restoring=True))


PROFILES = {"demo": demo, "gap": gap, "small": small}

_DIMENSIONS = (("_v_per_s", Dimension.VOLT_PER_SECOND), ("_v", Dimension.VOLT), ("_a", Dimension.AMP),
               ("_f", Dimension.FARAD), ("_ohm", Dimension.OHM), ("_s", Dimension.SECOND), ("_hz", Dimension.HERTZ))


def changed(params: PlantParams, changes: Iterable[str]) -> PlantParams:
    """Return the parameters with ``key=value`` changes, keys as in ``specimen.strength_v=12 kV``.

    Raises `UsageFault` with the nearest right key, or what the value should have been.
    """
    for change in changes:
        key, equals, text = change.partition("=")
        if not equals:
            raise UsageFault("key=value such as 'specimen.strength_v=12 kV'", repr(change), "set")
        params = _replaced(params, key.strip(), key.strip().split("."), text.strip())
    return params


def _replaced(part: Any, key: str, path: list[str], text: str) -> Any:
    names = [f.name for f in fields(part)]
    name = path[0]
    if name not in names or is_dataclass(getattr(part, name)) != (len(path) > 1):
        near = get_close_matches(name, names, 1)
        raise UsageFault(f"one of {', '.join(names)}", repr(name), f"set {key}", f"nearest: {near[0]}" if near else "")
    old = getattr(part, name)
    new = _replaced(old, key, path[1:], text) if len(path) > 1 else _value(old, key, name, text)
    return replace(part, **{name: new})


def _value(old: object, key: str, name: str, text: str) -> object:
    if isinstance(old, bool):
        if text not in ("yes", "no"):
            raise UsageFault("yes or no", repr(text), f"set {key}")
        return text == "yes"
    if isinstance(old, str):
        return text
    if isinstance(old, tuple):
        raise UsageFault("a single value", "a table", f"set {key}", "give a profile of its own for that")
    dimension = next((dim for end, dim in _DIMENSIONS if name.endswith(end)), Dimension.NUMBER)
    try:
        value = parse_quantity(text, Dimension.INTEGER if isinstance(old, int) else dimension)
    except QuantityFault as fault:
        raise UsageFault(fault.expected, fault.found, f"set {key}", fault.remedy) from None
    return int(value) if isinstance(old, int) else value
