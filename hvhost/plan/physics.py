"""Preflight, the physics: may this program run on this bench, and what is worth knowing before it does.

One check, one generator; ``PHYSICS`` is the list.  What refuses cannot be overridden; a note stops nothing.
"""

from collections.abc import Iterator
from math import exp

from hvhost.bench import hazards
from hvhost.bench.model import CutMeans, GroundDevice
from hvhost.plan.case import Case, Check
from hvhost.plan.compiler import shown_duration
from hvhost.plan.program import HoldStep, RampStep, RestStep, Step
from hvhost.plan.segments import segments_for, slew_of
from hvhost.plan.unroll import iec_tolerance
from hvhost.words.errors import CommandRefused
from hvhost.words.findings import Finding, Grade
from hvhost.words.quantities import Dimension, format_quantity

EXACT = 1 + 1e-9  # two roundings of one decimal value may differ in the last bit
CHARGING_WORTH_KNOWING = 0.5  # of the limit: above it, leakage has less than half of the limit left
# IEC 60060-1:2010, direct voltage: above 75 % of the test voltage about 2 % of it per second (the last quarter takes
# 12.5 s); uncertainty of the measured mean at most 3 % (k = 2).
IEC_RAISING_FROM, IEC_RAISING_PER_S, IEC_UNCERTAINTY = 0.75, 0.02, 0.03
ROW_S = 1.0  # a queue's worth of segments shorter than this may run dry while the host sends the next ones


def volts(value: float) -> str:
    """A voltage in a sentence."""
    return format_quantity(value, Dimension.VOLT, 5)


def amps(value: float) -> str:
    """A current in a sentence."""
    return format_quantity(value, Dimension.AMP, 4)


def slew(value: float) -> str:
    """A slew in a sentence."""
    return format_quantity(value, Dimension.VOLT_PER_SECOND, 5)


def _level(step: Step) -> float:
    if isinstance(step, RampStep):
        return step.to_v
    return step.v if isinstance(step, HoldStep) else 0.0


def check_ceilings(case: Case) -> Iterator[Finding]:
    """S2: no set-point above the bench's ceilings."""
    for step in case.energised_steps():
        if _level(step) > case.bench.v_max * EXACT:
            yield case.at_step(Grade.REFUSE, step, step.name, f"at most the bench's {volts(case.bench.v_max)}",
                               volts(_level(step)))
        if not isinstance(step, RestStep) and step.limit_a > case.bench.i_max * EXACT:
            yield case.at_step(Grade.REFUSE, step, f"{step.name}: current_limit",
                               f"at most the bench's {amps(case.bench.i_max)}", amps(step.limit_a))


def check_slew(case: Case) -> Iterator[Finding]:
    """S2: no slew above the bench's ceiling."""
    for step in case.program.steps:
        if isinstance(step, RampStep) and step.slew_v_per_s > case.bench.slew_v_per_s * EXACT:
            yield case.at_step(Grade.REFUSE, step, f"{step.name}: rate", f"at most the bench's "
                               f"{slew(case.bench.slew_v_per_s)}", slew(step.slew_v_per_s))
    retreat = case.program.retreat
    if retreat is not None and retreat.climb_v_per_s > case.bench.slew_v_per_s * EXACT and case.plan.retreat:
        yield case.in_plan(Grade.REFUSE, case.plan.retreat.line, "retreat.climb",
                           f"at most the bench's {slew(case.bench.slew_v_per_s)}", slew(retreat.climb_v_per_s))


def check_duration(case: Case) -> Iterator[Finding]:
    """The longest course of the program fits into the bench's longest time on."""
    longest, limit = case.program.duration_s, case.bench.longest_on_s
    if longest > limit:
        yield case.in_plan(Grade.REFUSE, 1, "duration", f"at most the bench's longest time on, {shown_duration(limit)}",
                           shown_duration(longest))
    watch = case.bench.unattended
    if watch is not None and not case.bench.attended and longest > watch.reason_beyond_s:
        yield case.in_plan(Grade.REASON, 1, "duration", f"at most {shown_duration(watch.reason_beyond_s)} with nobody "
                           "there", shown_duration(longest))


def check_limits(case: Case) -> Iterator[Finding]:
    """A step's limits are tighter than the bench's and leave room for what the step itself does."""
    bench = case.bench.limits
    for step in case.energised_steps():
        own = step.limits
        tighter = (("trip", own.trip_a, bench.overcurrent_a, amps), ("level", own.level_a, bench.overcurrent_level_a,
                   amps), ("overvoltage", own.v_over, bench.overvoltage_v, volts),
                   ("level_time", own.level_s, bench.overcurrent_level_s, lambda s: f"{s:g} s"))
        for name, value, most, shown in tighter:
            if value is not None and value > most * EXACT:
                yield case.at_step(Grade.REFUSE, step, f"limits.{name}", f"at most the bench's own {shown(most)}",
                                   shown(value), "a plan can only tighten")
        if own.v_over is not None and own.v_over <= _level(step):
            yield case.at_step(Grade.REFUSE, step, "limits.overvoltage", f"above the step's own {volts(_level(step))}",
                               volts(own.v_over))
        if own.trip_a is not None and not isinstance(step, RestStep) and own.trip_a > step.limit_a * EXACT:
            yield case.at_step(Grade.NOTE, step, "limits.trip", f"at most the current limit {amps(step.limit_a)}",
                               amps(own.trip_a), "the supply limits the current first; only a discharge of what is "
                               "stored can exceed it")


def check_charging(case: Case) -> Iterator[Finding]:
    """The ramp's charging current, I = C dV/dt, leaves the current limit room."""
    for step in case.program.steps:
        if not isinstance(step, RampStep):
            continue
        current = hazards.charging_current_a(case.load_f, step.slew_v_per_s)
        limit = min(step.limit_a, step.limits.trip_a or step.limit_a, step.limits.level_a or step.limit_a,
                    case.bench.limits.overcurrent_level_a)
        told = f"{amps(current)} to charge {format_quantity(case.load_f, Dimension.FARAD)} at {slew(step.slew_v_per_s)}"
        if current >= limit:
            yield case.at_step(Grade.REFUSE, step, f"{step.name}: charging current", f"less than the limit "
                               f"{amps(limit)}", told, "ramp more slowly")
        elif current > CHARGING_WORTH_KNOWING * limit:
            yield case.at_step(Grade.NOTE, step, f"{step.name}: charging current", f"well below the limit "
                               f"{amps(limit)}", told)


def check_energy(case: Case) -> Iterator[Finding]:
    """What is stored at the highest voltage, against the discharge resistor and the published limits."""
    held = hazards.stored(case.load_f, case.program.v_highest, case.bench.wet)
    energy = format_quantity(held.energy_j, Dimension.JOULE, 3)
    at = f"in {format_quantity(case.load_f, Dimension.FARAD)} at {volts(case.program.v_highest)}"
    if case.bench.ground is not GroundDevice.NONE and held.energy_j > case.bench.discharge_j:
        yield case.in_plan(Grade.REFUSE, 1, "stored energy", "at most the discharge resistor's "
                           f"{format_quantity(case.bench.discharge_j, Dimension.JOULE, 3)}", f"{energy} {at}")
    elif held.dangerous:
        charge = format_quantity(held.charge_c, Dimension.COULOMB, 3)
        yield case.in_plan(Grade.NOTE, 1, "stored energy", f"dangerous to touch beyond {held.rule} (IEC 61010-1, "
                           "EN 50191)", f"{energy}, {charge} {at}", "discharge through the resistor, then ground "
                           "solidly and leave it on while working")


def check_retreat(case: Case) -> Iterator[Finding]:
    """The arc reaction keeps to the bench's bounds and has an inhibit to act by."""
    reaction, arcs, written = case.program.reaction, case.bench.arcs, case.plan.pause
    if reaction is None or written is None:
        return
    if CutMeans.INHIBIT not in case.bench.cut_path or CutMeans.INHIBIT not in case.bench.read_backs:
        yield case.in_plan(Grade.REFUSE, written.line, "arc", "a bench with an inhibit that is read back",
                           "none; an arc can only latch")
    if reaction.count > arcs.count:
        yield case.in_plan(Grade.REFUSE, written.count.line, "arc.count", f"at most the bench's {arcs.count}",
                           str(reaction.count))
    if reaction.rest_s < arcs.rest_s:
        yield case.in_plan(Grade.REFUSE, written.rest.line, "arc.rest", f"at least the bench's {arcs.rest_s:g} s",
                           f"{reaction.rest_s:g} s")
    if reaction.window_s < arcs.window_s:
        yield case.in_plan(Grade.REFUSE, written.window.line, "arc.window", f"at least the bench's {arcs.window_s:g} s",
                           f"{reaction.window_s:g} s")
    yield from _check_series(case)


def _check_series(case: Case) -> Iterator[Finding]:
    retreat, written, reaction = case.program.retreat, case.plan.retreat, case.program.reaction
    if retreat is None or written is None or reaction is None:
        return
    ramps = sum(isinstance(step, RampStep) and step.until_breakdown for step in case.program.steps)
    most = retreat.series * max(1, ramps)
    if most > case.bench.arcs.total:
        yield case.in_plan(Grade.REFUSE, written.series.line, "retreat.series", f"at most {case.bench.arcs.total} "
                           "breakdowns for one arm, the bench's total", str(most))
    for step, following in zip(case.program.steps, case.program.steps[1:], strict=False):
        if isinstance(step, RampStep) and step.until_breakdown and isinstance(following, RestStep):
            latest = reaction.rest_s + 20.0
            if following.rest_s > latest:
                yield case.at_step(Grade.REFUSE, following, "rest", f"at most {latest:g} s after a ramp until "
                                   "breakdown, before the pause expires", f"{following.rest_s:g} s")


def check_withstand(case: Case) -> Iterator[Finding]:
    """Withstand practice of IEC 60060-1: raising, tolerance, uncertainty."""
    steps = case.program.steps
    for hold in case.withstand_holds():
        fastest = IEC_RAISING_PER_S * hold.v
        at = hold.number - 1
        while at >= 0 and isinstance(ramp := steps[at], RampStep) and ramp.to_v > IEC_RAISING_FROM * hold.v * EXACT:
            if ramp.slew_v_per_s > fastest * EXACT:
                yield case.at_step(Grade.NOTE, ramp, f"{ramp.name}: rate", f"about {slew(fastest)} above "
                                   f"{volts(IEC_RAISING_FROM * hold.v)} (2 %/s above 75 %, IEC 60060-1)",
                                   slew(ramp.slew_v_per_s))
            at -= 1
        if hold.tolerance > iec_tolerance(hold.hold_s) * EXACT:
            yield case.at_step(Grade.NOTE, hold, f"{hold.name}: tolerance", f"at most {iec_tolerance(hold.hold_s):.0%} "
                               f"for {hold.hold_s:g} s (IEC 60060-1)", f"{hold.tolerance:.2%}")
        uncertainty = 2.0 * case.bench.voltage.monitor.u_mean(hold.v) / hold.v
        if uncertainty > IEC_UNCERTAINTY:
            yield case.at_step(Grade.REASON, hold, f"{hold.name}: uncertainty of the level", "at most 3 % (k = 2, "
                               "IEC 60060-1)", f"{uncertainty:.1%} at {volts(hold.v)}")


def check_visible(case: Case) -> Iterator[Finding]:
    """A breakdown from a voltage below the collapse limit makes no collapse that the rule can see."""
    drop = case.bench.limits.drop_v
    for step in case.program.steps:
        wanted = isinstance(step, RampStep) and step.until_breakdown
        if (wanted or isinstance(step, HoldStep)) and 0.0 < _level(step) <= drop:
            yield case.at_step(Grade.REASON, step, step.name, f"a voltage above the collapse limit {volts(drop)}",
                               volts(_level(step)), "below it a breakdown shows by overcurrent or deviation only")


def check_fall(case: Case) -> Iterator[Finding]:
    """A one-quadrant supply cannot pull the load down faster than it bleeds: the readback will lag."""
    at_v = 0.0
    for step in case.program.steps:
        if isinstance(step, RampStep) and 0.0 < step.to_v < at_v:
            natural = at_v * exp(-step.duration_s / case.bench.bleed_s)
            if natural > step.to_v * 1.01:
                yield case.at_step(Grade.NOTE, step, step.name, f"a fall no faster than the bleed time "
                                   f"{case.bench.bleed_s:g} s gives", f"{volts(at_v)} to {volts(step.to_v)} in "
                                   f"{step.duration_s:g} s", "the voltage may stay above the set-point for a while")
        at_v = _level(step)


def check_proof(case: Case) -> Iterator[Finding]:
    """The window that is to prove the specimen connected can be told from zero by this chain at all.

    C = I / (dV/dt): the current monitor's zero makes U(C) = 2 u(I0) / (dV/dt), least in the fastest ramp.
    """
    u_amps = 2.0 * case.bench.current.monitor.u_zero
    proof = case.program.specimen_proof
    if proof is None:
        return
    fastest = max((step.slew_v_per_s for step in case.program.steps if isinstance(step, RampStep) and step.to_v > 0.0),
                  default=0.0)
    if proof.capacitance_f is not None and (fastest == 0.0 or u_amps / fastest >= proof.capacitance_f[1]):
        told = "no ramp"
        if fastest:
            told = f"U = {format_quantity(u_amps / fastest, Dimension.FARAD, 2)} at {slew(fastest)}"
        yield case.in_sheet(Grade.NOTE, "connected.capacitance", "a window that the fastest ramp can tell from an open "
                            "lead", told, "ramp faster, or the verdict will be 'not decided: no specimen seen'")
    if proof.current_a is not None and u_amps >= proof.current_a[1]:
        yield case.in_sheet(Grade.NOTE, "connected.current", "a window that the monitor can tell from an open lead",
                            f"U = {amps(u_amps)}", "the verdict will be 'not decided: no specimen seen'")


def check_segments(case: Case) -> Iterator[Finding]:
    """Every step compiles to segments, and no row of short ones outruns the queue."""
    v_word = i_word = 0
    row: list[int] = []
    for step in case.program.steps:
        if not isinstance(step, RampStep):
            row = []
        try:
            made = segments_for(step, v_word, i_word, case.bench, case.tick_hz)
        except CommandRefused:
            return  # above a ceiling: told by check_ceilings
        for segment in made:
            v_word, i_word = segment.v, segment.i
            row.append(segment.ticks)
        if len(row) > case.queue and sum(row[-case.queue:]) < ROW_S * case.tick_hz:
            yield case.at_step(Grade.NOTE, step, step.name, f"a row of {case.queue} segments (the MCU's queue) that "
                               f"takes at least {ROW_S:g} s", f"{sum(row[-case.queue:]) / case.tick_hz:.2g} s",
                               "where the queue runs dry the voltage stands still, and the record says so")
            return


def check_resolution(case: Case) -> Iterator[Finding]:
    """A ramp slower than the programming converter's code per second climbs in visible stairs."""
    for step in case.program.steps:
        if isinstance(step, RampStep) and step.duration_s > 0.0:
            codes = abs(slew_of(step, case.bench)) / case.bench.voltage.program.quantum
            if codes < 1.0:
                yield case.at_step(Grade.NOTE, step, f"{step.name}: rate", "at least one code a second "
                                   f"({slew(case.bench.voltage.program.quantum)})", slew(step.slew_v_per_s),
                                   "the voltage climbs in steps of one code")


PHYSICS: tuple[Check, ...] = (check_ceilings, check_slew, check_duration, check_limits, check_charging, check_energy,
                              check_retreat, check_withstand, check_visible, check_fall, check_proof,
                              check_segments, check_resolution)
