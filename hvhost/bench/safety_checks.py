"""Checks about wiring, stored energy and people: what the safety rules S0, S1, S4 and S6 ask of a bench."""

from collections.abc import Iterator

from hvhost.bench import hazards
from hvhost.bench.document import BenchFile, FedFrom, MeasuredAt
from hvhost.bench.model import CutMeans, GroundDevice
from hvhost.bench.saying import NOTE, REASON, REFUSE, SAME, Say, joules, seconds, volts
from hvhost.words.findings import Finding

DISCHARGE_S = 10.0  # a grounding device that needs longer will be lifted off too early


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
    if b.danger_signal.dark_with_relay_open and b.cut_path.means and CutMeans.RELAY not in b.cut_path.means:
        yield say(REFUSE, "danger_signal.dark_with_relay_open", "no: without a relay the signal burns as long as the "
                  "supply has power", "yes", "the MCU would take the lit signal for power that a cut left on")


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
            yield say(REASON, "cut_path.read_back", f"{unread.value}", f"no read-back: {unread.value} is not proven",
                      "" if back else "without any read-back the bench counts as programming only")


def check_without_mcu(b: BenchFile, say: Say) -> Iterator[Finding]:
    """S4: the wiring inhibits when the MCU is absent or in reset."""
    if not b.cut_path.inhibits_without_mcu:
        yield say(REASON, "cut_path.inhibits_without_mcu", "yes: the wiring inhibits without the MCU, and in its reset",
                  "no", "a pull to the inhibiting level, and a relay that drops without its driver")


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


SAFETY_CHECKS = (check_touch,
                 check_interlock,
                 check_contacts,
                 check_cut_path,
                 check_without_mcu,
                 check_bleed,
                 check_bleed_time,
                 check_ground,
                 check_ground_time,
                 check_attended,
                 check_measuring,
                 check_arcs)
