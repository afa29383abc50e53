"""Checks of numbers against each other: ceilings, converters, limits, times, calibration, auxiliary instruments."""

from collections.abc import Iterator

from hvhost.bench.document import BenchFile, CurrentBlock, MonitorBlock, Polarity, VoltageBlock
from hvhost.bench.saying import NOTE, REASON, REFUSE, SAME, Say, amps, delay_samples, seconds, volts
from hvhost.words.findings import Finding
from hvhost.words.modelpaths import Absent


def check_ceilings(b: BenchFile, say: Say) -> Iterator[Finding]:
    """Ceilings lie within the supply's rating."""
    if b.ceilings.voltage > b.supply.voltage:
        yield say(REFUSE, "ceilings.voltage", f"at most the supply's {volts(b.supply.voltage)}",
                  volts(b.ceilings.voltage))
    if b.ceilings.current > b.supply.current:
        yield say(REFUSE, "ceilings.current", f"at most the supply's {amps(b.supply.current)}",
                  amps(b.ceilings.current))


def check_lower(b: BenchFile, say: Say) -> Iterator[Finding]:
    """A lower that runs out of time cuts above zero: worth knowing."""
    needed = b.ceilings.voltage / b.lower.slew
    if needed > b.lower.longest * (1 + SAME):
        yield say(NOTE, "lower.longest", f"at least {seconds(needed)} to reach zero from the ceiling",
                  seconds(b.lower.longest), "a lower from up there ends in a cut")


def check_lease(b: BenchFile, say: Say) -> Iterator[Finding]:
    """The lease lies within its own bounds."""
    lease = b.lease
    if lease.shortest > lease.longest:
        yield say(REFUSE, "lease.shortest", f"at most the longest, {seconds(lease.longest)}", seconds(lease.shortest))
    elif not lease.shortest <= lease.time <= lease.longest:
        yield say(REFUSE, "lease.time", f"{seconds(lease.shortest)} to {seconds(lease.longest)}", seconds(lease.time))


def _program_reach(b: VoltageBlock | CurrentBlock) -> float:
    """The highest value that the programming converter can ask for."""
    program = b.program
    last = (1 << program.bits) - 1
    at = program.converter_code or last
    return program.full_scale / program.input * program.converter * last / at


def check_program_reach(b: BenchFile, say: Say) -> Iterator[Finding]:
    """The programming converters reach the ceilings, and their top is no more than twice the supply's rating."""
    yield from _reach(b, say, "voltage")
    yield from _reach(b, say, "current")


def _reach(b: BenchFile, say: Say, name: str) -> Iterator[Finding]:
    shown = volts if name == "voltage" else amps
    try:
        reach = _program_reach(b.voltage if name == "voltage" else b.current)
        ceiling = b.ceilings.voltage if name == "voltage" else b.ceilings.current
    except Absent:
        return
    if ceiling > reach * (1 + 2**-8):  # one code of the coarsest converter
        yield say(REFUSE, f"{name}.program.converter", f"a range that reaches the ceiling {shown(ceiling)}",
                  f"{shown(reach)} at its last code")


def _monitor_reach(monitor: MonitorBlock, full_scale: float) -> float:
    """The highest oriented value that the monitor's converter shows before it is at its limit."""
    last = (1 << (monitor.bits - 1)) - 1 if monitor.signed else (1 << monitor.bits) - 1
    lowest = -(last + 1) if monitor.signed else 0
    per_code = full_scale / monitor.output * monitor.converter / (monitor.converter_code or last)
    if monitor.sign is Polarity.POSITIVE:
        return per_code * (last - 1 - monitor.zero_code)
    return per_code * (monitor.zero_code - lowest - 1)


def check_voltage_monitor(b: BenchFile, say: Say) -> Iterator[Finding]:
    """The voltage monitor can show the overvoltage limit: a code at the converter's limit says nothing."""
    monitor = b.voltage.monitor
    reach = _monitor_reach(monitor, monitor.full_scale)
    if reach <= 0:
        yield say(REFUSE, "voltage.monitor.zero_code", "codes on the monitor's side of zero",
                  f"none: {monitor.sign.value} signal, {'signed' if monitor.signed else 'unsigned'} converter, "
                  f"zero at code {monitor.zero_code:g}")
    elif b.limits.overvoltage > reach * (1 + SAME):
        yield say(REFUSE, "limits.overvoltage", f"at most {volts(reach)}, where the monitor's converter ends",
                  volts(b.limits.overvoltage))


def check_current_monitor(b: BenchFile, say: Say) -> Iterator[Finding]:
    """The current monitor can show the overcurrent limit."""
    monitor = b.current.monitor
    reach = _monitor_reach(monitor, monitor.full_scale)
    if reach <= 0:
        yield say(REFUSE, "current.monitor.zero_code", "codes on the monitor's side of zero",
                  f"none: {monitor.sign.value} signal, {'signed' if monitor.signed else 'unsigned'} converter, "
                  f"zero at code {monitor.zero_code:g}")
    elif b.limits.overcurrent > reach * (1 + SAME):
        yield say(REFUSE, "limits.overcurrent", f"at most {amps(reach)}, where the monitor's converter ends",
                  amps(b.limits.overcurrent))


def check_amplitude_limits(b: BenchFile, say: Say) -> Iterator[Finding]:
    """Limits stand in order and above the ceilings that they guard."""
    if b.limits.overvoltage <= b.ceilings.voltage:
        yield say(REFUSE, "limits.overvoltage", f"above the ceiling {volts(b.ceilings.voltage)}",
                  volts(b.limits.overvoltage), "at the ceiling it would trip")


def check_current_limits(b: BenchFile, say: Say) -> Iterator[Finding]:
    """The level that may last for a time is below the one that may not."""
    if b.limits.overcurrent_level > b.limits.overcurrent:
        yield say(REFUSE, "limits.overcurrent_level", f"at most the overcurrent {amps(b.limits.overcurrent)}",
                  amps(b.limits.overcurrent_level))


def check_collapse(b: BenchFile, say: Say) -> Iterator[Finding]:
    """The collapse limit is larger than what is no collapse, smaller than the voltage that collapses."""
    ripple = 2.0 * b.supply.ripple
    if b.limits.collapse <= ripple:
        yield say(REFUSE, "limits.collapse", f"more than the ripple from top to bottom, {volts(ripple)}",
                  volts(b.limits.collapse))
    if b.limits.collapse >= b.ceilings.voltage:
        yield say(REFUSE, "limits.collapse", f"less than the ceiling {volts(b.ceilings.voltage)}",
                  volts(b.limits.collapse), "no breakdown would ever be seen")


def check_delay(b: BenchFile, say: Say) -> Iterator[Finding]:
    """The programming delay is at most 64 samples (what the MCU keeps)."""
    samples = delay_samples(b.supply.programming_delay, b.sampling.rate)
    if samples > 64:
        yield say(REFUSE, "supply.programming_delay", f"at most 64 samples, {seconds(64 / b.sampling.rate)}",
                  f"{seconds(b.supply.programming_delay)}, {samples} samples")


def check_missing(b: BenchFile, say: Say) -> Iterator[Finding]:
    """A readback is called missing after several samples, not after one."""
    least = 3 / b.sampling.rate
    if b.limits.missing_after < least * (1 - SAME):
        yield say(REFUSE, "limits.missing_after", f"at least 3 samples, {seconds(least)}",
                  seconds(b.limits.missing_after))


def check_zero_band(b: BenchFile, say: Say) -> Iterator[Finding]:
    """The zero band is wider than the zero's own uncertainty, narrow against the ceiling."""
    if b.bleed.zero_band < b.voltage.monitor.zero_uncertainty:
        yield say(REFUSE, "bleed.zero_band", f"at least the monitor's zero uncertainty "
                  f"{volts(b.voltage.monitor.zero_uncertainty)}", volts(b.bleed.zero_band))
    if b.bleed.zero_band > 0.05 * b.ceilings.voltage * (1 + SAME):
        yield say(REFUSE, "bleed.zero_band", f"at most 5 % of the ceiling, {volts(0.05 * b.ceilings.voltage)}",
                  volts(b.bleed.zero_band))


def check_calibration(b: BenchFile, say: Say) -> Iterator[Finding]:
    """S1: a calibration, or a reason on the record."""
    if b.calibration is None:
        yield say(REASON, "calibration", "a certificate and its last day", "nothing")


def check_slow_channels(b: BenchFile, say: Say) -> Iterator[Finding]:
    """Auxiliary instruments have names of their own."""
    seen: dict[str, int] = {}
    for at, channel in enumerate(b.slow_channels):
        try:
            name = channel.name
        except Absent:
            continue
        if name in seen:
            yield say(REFUSE, f"slow_channels.{at}.name", "a name of its own", f"'{name}' again (as number "
                      f"{seen[name]})")
        seen.setdefault(name, at + 1)


RANGE_CHECKS = (check_ceilings,
                check_lower,
                check_lease,
                check_program_reach,
                check_voltage_monitor,
                check_current_monitor,
                check_amplitude_limits,
                check_current_limits,
                check_collapse,
                check_delay,
                check_missing,
                check_zero_band,
                check_calibration,
                check_slow_channels)
