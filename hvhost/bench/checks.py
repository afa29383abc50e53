"""What no single key can tell: combinations that are refused, that need a reason, or that are worth a note.

Each check is a generator over the file as far as its values were right; a value that was wrong has been told already
and ends only the checks that need it.  S-numbers are the safety rules of the developers' page.
"""

from collections.abc import Callable, Iterator
from datetime import date
from typing import Protocol

from hvhost.bench import hazards
from hvhost.bench.document import BenchFile, CurrentBlock, FedFrom, MeasuredAt, MonitorBlock, Polarity, VoltageBlock
from hvhost.bench.model import CutMeans, GroundDevice
from hvhost.words.findings import Finding, Grade
from hvhost.words.modelpaths import Absent
from hvhost.words.quantities import Dimension, format_quantity
from hvhost.words.textfile import Reading

EXPIRES_SOON_DAYS = 30  # long enough to have a chain calibrated
DISCHARGE_S = 10.0  # a ground device that needs longer will be lifted off too early
SAME = 1e-9  # relative; a bound that was computed equals the typed value although a last bit differs
REASON, REFUSE, NOTE = Grade.REASON, Grade.REFUSE, Grade.NOTE


class Say(Protocol):
    """Makes a finding about one dotted place of the file."""

    def __call__(self, grade: Grade, place: str, expected: str, found: str, remedy: str = "") -> Finding:
        """The finding, with the line of the place."""
        ...


Check = Callable[[BenchFile, Say], Iterator[Finding]]


def volts(value: float) -> str:
    """A voltage in a message."""
    return format_quantity(value, Dimension.VOLT, 5)


def amps(value: float) -> str:
    """A current in a message."""
    return format_quantity(value, Dimension.AMP, 5)


def seconds(value: float) -> str:
    """A duration in a message."""
    return format_quantity(value, Dimension.SECOND, 5)


def joules(value: float) -> str:
    """An energy in a message."""
    return format_quantity(value, Dimension.JOULE, 3)


def check_touch(b: BenchFile, say: Say) -> Iterator[Finding]:
    """The touch threshold is at most the standard's (IEC 61010-1 6.3.1)."""
    most = hazards.touch_threshold_v(b.touch.wet)
    if b.touch.threshold > most:
        yield say(REFUSE, "touch.threshold", f"at most {volts(most)}{' where wet' if b.touch.wet else ''}",
                  volts(b.touch.threshold))


def _dangerous(b: BenchFile) -> bool:
    return b.ceilings.voltage > hazards.touch_threshold_v(b.touch.wet)


def check_interlock(b: BenchFile, say: Say) -> Iterator[Finding]:
    """S0: interlock and emergency switching off act by contacts in the supply's mains."""
    if _dangerous(b):
        remedy = "put contacts of the loop into the supply's mains: no MCU and no PC may stand in this path"
        if not b.interlock.hard_wired:
            yield say(REFUSE, "interlock.hard_wired", "yes, above the touch threshold", "no", remedy)
        if not b.interlock.emergency_hard_wired:
            yield say(REFUSE, "interlock.emergency_hard_wired", "yes, above the touch threshold", "no", remedy)
        if b.danger_signal.fed_from is not FedFrom.POWER_CONTACT:
            yield say(REFUSE, "danger_signal.fed_from", "power contact, above the touch threshold",
                      b.danger_signal.fed_from.value)
    if not b.interlock.latches_open:
        yield say(REASON, "interlock.latches_open", "yes: closing the loop restores nothing", "no",
                  "a manual reset outside, in view of the area")


def check_contacts(b: BenchFile, say: Say) -> Iterator[Finding]:
    """Inputs whose absence leaves the MCU blind."""
    if not b.interlock.emergency_input:
        yield say(REASON, "interlock.emergency_input", "yes: a second contact that the MCU reads", "no")
    if not b.danger_signal.input:
        yield say(REASON, "danger_signal.input", "yes: the signal is seen lit before the output is on", "no")
    if not b.inputs.auxiliary_supplies:
        yield say(REASON, "inputs.auxiliary_supplies", "yes: the driver's and converters' rails are watched", "no")


def check_cut_path(b: BenchFile, say: Say) -> Iterator[Finding]:
    """A cut needs means; a means without read-back is not proven; programming alone is no cut of power."""
    means, back = b.cut_path.means, b.cut_path.read_back
    if not means:
        yield say(REFUSE, "cut_path.means", "at least one of relay, inhibit, clear, programming", "an empty list")
    for name, listed in (("means", means), ("read_back", back)):
        doubled = sorted({m.value for m in listed if listed.count(m) > 1})
        if doubled:
            yield say(REFUSE, f"cut_path.{name}", "each means once", f"{', '.join(doubled)} twice")
    for means_read in sorted(set(back)):
        if means_read not in (CutMeans.RELAY, CutMeans.INHIBIT):
            yield say(REFUSE, "cut_path.read_back", "relay or inhibit: the others have no contact to read",
                      means_read.value)
        elif means_read not in means:
            yield say(REFUSE, "cut_path.read_back", "only means that are listed", means_read.value)
    if means and not set(means) & {CutMeans.RELAY, CutMeans.INHIBIT, CutMeans.CLEAR}:
        yield say(REASON, "cut_path.means", "a relay or an inhibit", "programming alone",
                  "the supply stays powered after every cut, and every screen says so")
    for unread in (CutMeans.RELAY, CutMeans.INHIBIT):
        if unread in means and unread not in back:
            yield say(REASON, "cut_path.read_back", f"{unread.value}", f"no read-back: {unread.value} is not proven")


def check_without_mcu(b: BenchFile, say: Say) -> Iterator[Finding]:
    """S4: the wiring inhibits when the MCU is absent or in reset."""
    if not b.cut_path.inhibits_without_mcu:
        yield say(REASON, "cut_path.inhibits_without_mcu", "yes: the wiring inhibits without the MCU, and in its reset",
                  "no", "a pull to the inhibiting level, and a relay that drops without its driver")


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


def delay_samples(delay_s: float, rate_hz: float) -> int:
    """Samples until the readback follows: the delay, rounded up, and one for the phase of sampling."""
    product = delay_s * rate_hz
    whole = int(product)
    return whole + (product > whole + SAME * max(1, whole)) + 1


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


def check_bleed(b: BenchFile, say: Say) -> Iterator[Finding]:
    """The bleed times reach the touch threshold: t = tau ln(V0 / V); five leave 135 V of 20 kV."""
    threshold = min(b.touch.threshold, hazards.touch_threshold_v(b.touch.wet))
    needed = hazards.bleed_times_to(b.ceilings.voltage, threshold)
    if b.bleed.times < needed:
        left = hazards.voltage_after_v(b.ceilings.voltage, 1.0, b.bleed.times)
        yield say(REFUSE, "bleed.times", f"at least {int(needed) + 1}: from {volts(b.ceilings.voltage)} to "
                  f"{volts(threshold)}", f"{b.bleed.times}, which leaves {volts(left)}")


def check_bleed_time(b: BenchFile, say: Say) -> Iterator[Finding]:
    """The bleed time is at least what the bench's own capacitance needs through the stated resistance."""
    if b.bleed.resistance is None:
        return
    tau = b.bleed.resistance * (b.supply.output_capacitance + b.cable.capacitance)
    if b.bleed.time < tau * (1 - SAME):
        yield say(REFUSE, "bleed.time", f"at least resistance times output and cable capacitance, {seconds(tau)}",
                  seconds(b.bleed.time), "add the largest specimen's capacitance")


def check_ground(b: BenchFile, say: Say) -> Iterator[Finding]:
    """S1: a grounding device with a resistor that bears what the bench itself holds."""
    energy = hazards.stored_energy_j(b.supply.output_capacitance + b.cable.capacitance, b.ceilings.voltage)
    if b.ground.device is GroundDevice.NONE:
        yield say(REASON, "ground.device", "stick or switch", f"none; {joules(energy)} are stored at the ceiling")
        if b.ground.resistor is not None or b.ground.energy is not None:
            yield say(REFUSE, "ground.device", "stick or switch where a resistor is stated", "none")
        return
    if b.ground.resistor is None:
        yield say(REFUSE, "ground.resistor", "the discharge resistor of the grounding device", "nothing")
    if b.ground.energy is None:
        yield say(REFUSE, "ground.energy", "the energy that the resistor may take at once", "nothing")
    elif b.ground.energy < energy * (1 - SAME):
        yield say(REFUSE, "ground.energy", f"at least the {joules(energy)} that output and cable hold at the ceiling",
                  joules(b.ground.energy))


def check_ground_time(b: BenchFile, say: Say) -> Iterator[Finding]:
    """Through the grounding resistor the bench itself is down in seconds."""
    if b.ground.device is GroundDevice.NONE or b.ground.resistor is None:
        return
    tau = b.ground.resistor * (b.supply.output_capacitance + b.cable.capacitance)
    time = hazards.time_to_s(b.ceilings.voltage, b.touch.threshold, tau)
    if time > DISCHARGE_S:
        yield say(REFUSE, "ground.resistor", f"a discharge below the touch threshold within {seconds(DISCHARGE_S)}",
                  seconds(time))


def check_attended(b: BenchFile, say: Say) -> Iterator[Finding]:
    """Without a person, a contact to notify and inputs for fire and over-temperature, or a reason for long runs."""
    if b.attended:
        if b.unattended is not None:
            yield say(NOTE, "unattended", "nothing, with 'attended: yes'", "a block that is not used")
        return
    if b.unattended is None:
        yield say(REFUSE, "attended", "the block 'unattended' with 'attended: no'", "nothing",
                  "name the contact to notify, the inputs, and when a reason is due")
        return
    lacking = [name for name, there in (("fire input", b.unattended.fire_input),
                                        ("over-temperature input", b.unattended.over_temperature_input)) if not there]
    if lacking:
        yield say(REASON, "unattended", "fire and over-temperature inputs", f"no {' and no '.join(lacking)}",
                  f"each run beyond {seconds(b.unattended.reason_beyond)} needs a reason")


def check_measuring(b: BenchFile, say: Say) -> Iterator[Finding]:
    """S6: where the voltage after a cut cannot be told from the monitor."""
    monitor = b.voltage.monitor
    if monitor.powered_after_cut and monitor.measured_at is MeasuredAt.SPECIMEN:
        if monitor.zero_uncertainty >= b.touch.threshold:
            yield say(NOTE, "voltage.monitor.zero_uncertainty", f"below the touch threshold {volts(b.touch.threshold)}",
                      volts(monitor.zero_uncertainty), "after a cut the program says 'not measured here'")
        return
    why = "unpowered after the cut" if not monitor.powered_after_cut else "measured at the supply"
    yield say(NOTE, "voltage.monitor.powered_after_cut" if not monitor.powered_after_cut else
              "voltage.monitor.measured_at", "a monitor at the specimen, powered after the cut", why,
              "after a cut the program says 'not measured here'")


def check_arcs(b: BenchFile, say: Say) -> Iterator[Finding]:
    """Pausing needs a means that stops without the relay, and bounds in order."""
    if b.arcs.count == 0:
        return
    if CutMeans.INHIBIT not in b.cut_path.read_back:
        yield say(REFUSE, "arcs.count", "0: an arc pause needs an inhibit that is read back", str(b.arcs.count))
    if b.arcs.total < b.arcs.count:
        yield say(REFUSE, "arcs.total", f"at least the count, {b.arcs.count}", str(b.arcs.total))
    if b.arcs.window < b.arcs.rest:
        yield say(REFUSE, "arcs.window", f"at least the rest, {seconds(b.arcs.rest)}", seconds(b.arcs.window))
    if b.arcs.restrike > b.arcs.rest:
        yield say(REFUSE, "arcs.restrike", f"at most the rest, {seconds(b.arcs.rest)}", seconds(b.arcs.restrike))


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


CHECKS: tuple[Check, ...] = (
    check_touch, check_interlock, check_contacts, check_cut_path, check_without_mcu, check_ceilings, check_lower,
    check_lease, check_program_reach, check_voltage_monitor, check_current_monitor, check_amplitude_limits,
    check_current_limits, check_collapse, check_delay, check_missing, check_zero_band, check_bleed, check_bleed_time,
    check_ground, check_ground_time, check_attended, check_measuring, check_arcs, check_calibration,
    check_slow_channels,
)


def cross_findings(reading: Reading[BenchFile]) -> tuple[Finding, ...]:
    """Every check that the right values of the file allow."""
    def say(grade: Grade, place: str, expected: str, found: str, remedy: str = "") -> Finding:
        parts = tuple(int(p) if p.isdigit() else p for p in place.split("."))
        what = ".".join(str(p + 1) if isinstance(p, int) else p for p in parts)  # people count from 1
        return Finding(grade=grade, file=reading.file, line=reading.line_of(*parts), what=what, expected=expected,
                       found=found, remedy=remedy)

    findings: list[Finding] = []
    for check in CHECKS:
        try:
            findings.extend(check(reading.partial, say))
        except Absent:
            continue
    return tuple(findings)


def date_findings(valid_until: date | None, today: date, file: str, line: int) -> tuple[Finding, ...]:
    """Whether the calibration is valid on a day: expired is *reason needed*, soon to expire a note."""
    if valid_until is None:
        return ()
    left = (valid_until - today).days
    if left < 0:
        return (Finding(grade=REASON, file=file, line=line, what="calibration.valid_until",
                        expected=f"{today} or later", found=f"{valid_until}, expired {-left} days ago"),)
    if left <= EXPIRES_SOON_DAYS:
        return (Finding(grade=NOTE, file=file, line=line, what="calibration.valid_until",
                        found=f"{valid_until}, {left} days from now"),)
    return ()
