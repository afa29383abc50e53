"""A stand-in made to a bench file's measure: its converters, scales, ratings and contacts."""

from dataclasses import replace

from hvhost.bench.model import Bench
from hvhost.bench.scaling import Channel, Scale
from hvhost.standin.params import Adc, ChainParams, Dac, PlantParams, demo
from hvhost.standin.params import SupplyParams as Supply

PIN_V = 10.0  # volts at a converter's highest code in the stand-in; only ratios matter


def plant_of(bench: Bench, like: PlantParams | None = None) -> PlantParams:
    """Parameters of a plant that fits the bench; specimen and what a bench file cannot tell come from ``like``."""
    like = like or demo()
    volts, amps = bench.voltage, bench.current
    v_full = volts.program.value(volts.program.code_high)
    i_full = amps.program.value(amps.program.code_high)
    supply = replace(like.supply, v_full=v_full, i_full=i_full, output_f=bench.output_f or like.supply.output_f,
                     ripple_v=0.0, ripple_v_per_a=bench.ripple_v / i_full, ripple_hz=bench.ripple_hz or 100.0,
                     bleed_ohm=_bleed(bench), slew_v_per_s=max(like.supply.slew_v_per_s, 2 * bench.slew_v_per_s))
    supply = replace(supply, clear_input="clear" in bench.cut_path)
    return replace(like, name=bench.name, v_dac=_dac(volts.program), i_dac=_dac(amps.program),
                   supply=_programmed(supply), chain=_chain(bench, like.chain), cable_f=bench.cable_f or like.cable_f,
                   contacts=replace(like.contacts, arm_input=bench.arm_input, relay="relay" in bench.cut_path,
                                    inhibit="inhibit" in bench.cut_path,
                                    interlock_latches=bench.interlock_latches))


def _programmed(supply: Supply) -> Supply:
    return replace(supply, program_full_v=PIN_V)


def _bleed(bench: Bench) -> float:
    """The bleed that gives the bench's bleed time on its own capacitance, the divider's gigohm aside."""
    return bench.bleed_s / max(bench.stored_f, 1e-12)


def _dac(scale: Scale) -> Dac:
    return Dac(bits=max(8, scale.code_high.bit_length()), full_v=PIN_V)


def _adc(channel: Channel) -> Adc:
    scale = channel.monitor
    bits = scale.code_high.bit_length() + (1 if channel.signed else 0)
    return Adc(bits=max(8, min(16, bits)), signed=channel.signed, full_v=PIN_V, offset_code=scale.zero)


def _chain(bench: Bench, like: ChainParams) -> ChainParams:
    volts, amps = bench.voltage, bench.current
    v_adc, i_adc = _adc(volts), _adc(amps)
    # codes per volt of output over codes per volt at the pin is the ratio that divider and shunt must give
    v_share = abs(1.0 / volts.monitor.gain) / v_adc.codes_per_v
    i_share = abs(1.0 / amps.monitor.gain) / i_adc.codes_per_v
    return replace(like, polarity=bench.polarity, v_sign=volts.monitor.sign, i_sign=amps.monitor.sign,
                   low_ohm=like.high_ohm * v_share / (1.0 - v_share), buffer_gain=1.0, shunt_ohm=i_share,
                   shunt_gain=1.0, v_adc=v_adc, i_adc=i_adc, at_specimen=bench.monitor_at_specimen,
                   powered_after_cut=bench.monitor_powered_after_cut)
