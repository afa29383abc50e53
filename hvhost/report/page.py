"""The page of one run in plain text: what was applied, for how long, what leaked, whether it arced, why it stopped.

Values carry the output's sign; every number that decides something carries its expanded uncertainty (k = 2).  Nothing
here says that a circuit may be touched.
"""

import textwrap
from collections.abc import Iterable, Iterator, Mapping
from datetime import UTC, datetime
from math import floor, log10

from hvhost.bench.cautions import (
    BEFORE_TOUCHING,
    NO_ARM_INPUT,
    NOT_INHIBITED_WITHOUT_MCU,
    NOT_MEASURED,
    PROGRAMMED_TO_ZERO,
)
from hvhost.measure.result import Result
from hvhost.measure.uncertainty import Value
from hvhost.measure.verdict import Decision
from hvhost.record.amend import amended_keys, revision_text
from hvhost.record.entries import Json
from hvhost.record.manifest import Check
from hvhost.record.meta import RunMeta

WIDTH = 80
WORDS = {Decision.PASS: "PASS", Decision.FAIL: "FAIL", Decision.OPEN: "NOT DECIDED"}


def page(meta: RunMeta, result: Result, check: Check | None = None, revisions: tuple[Json, ...] = (),
         damage: tuple[str, ...] = ()) -> str:
    """Return the whole page, 80 columns, ending in a line feed."""
    lines = [*_head(meta, result, amended_keys(revisions)), *_verdict(result), *_applied(meta, result),
             *_leaked(meta, result), *_arced(meta, result), *_stopped(result), *_cautions(meta, result),
             *_record(meta, result, check, revisions, damage)]
    return "\n".join(line.rstrip() for line in lines) + "\n"


def shown(value: Value, unit: str, factor: float, sign: int = 1) -> str:
    """Value ± U with the uncertainty to two figures and the value to the same place."""
    u = value.expanded * factor
    if not u > 0.0:
        return f"{sign * value.value * factor:.6g} {unit}"
    places = max(0, 1 - floor(log10(u)))
    return f"{sign * value.value * factor:.{places}f} {unit} ± {u:.{places}f} {unit}"


def utc_text(utc_ns: int) -> str:
    """UTC to the second."""
    return datetime.fromtimestamp(utc_ns // 1_000_000_000, UTC).strftime("%Y-%m-%d %H:%M:%S UTC")


def _title(text: str) -> list[str]:
    return ["", text, "-" * len(text)]


def _field(name: str, text: str) -> Iterator[str]:
    """One labelled value, wrapped under itself."""
    wrapped = textwrap.wrap(text, WIDTH - 18, break_long_words=True) or [""]
    for at, line in enumerate(wrapped):
        yield f"{name if at == 0 else '':<16}  {line}"


def _fields(pairs: Iterable[tuple[str, str]]) -> Iterator[str]:
    for name, text in pairs:
        if text:
            yield from _field(name, text)


def _head(meta: RunMeta, result: Result, changed: Mapping[str, int]) -> Iterator[str]:
    sheet, plan, bench = meta.sheet or {}, meta.plan or {}, meta.bench
    mark = {key: f" (corrected, revision {number})" for key, number in changed.items()}
    air = max((number for key, number in changed.items() if key.startswith("environment.")), default=0)
    environment = _environment(sheet.get("environment")) + (f" (corrected, revision {air})" if air else "")
    yield f"Run {meta.run}: {WORDS[result.verdict]}"
    yield "=" * WIDTH
    yield from _fields((
        ("specimen", str(sheet.get("specimen") or "") + mark.get("specimen", "")),
        ("order", str(sheet.get("order") or "") + mark.get("order", "")),
        ("plan", str(plan.get("title") or plan.get("file") or "direct run, no plan")),
        ("released by", str(plan.get("released_by") or "")),
        ("bench", str(bench.get("title") or bench.get("name") or bench.get("file") or "")),
        ("kind of run", meta.kind), ("operator", meta.operator + mark.get("operator", "")),
        ("second person", str(sheet.get("second_person") or "") + mark.get("second_person", "")),
        ("opened", utc_text(meta.opened_utc_ns)),
        ("polarity", "positive" if meta.polarity > 0 else "negative"),
        ("environment", environment),
    ))


def _environment(found: object) -> str:
    if not isinstance(found, dict):
        return ""
    units = {"temperature_c": ("{:.1f} °C", 1.0), "humidity": ("{:.0f} % relative humidity", 100.0),
             "pressure_pa": ("{:.1f} hPa", 0.01)}
    parts = [form.format(found[key] * factor) for key, (form, factor) in units.items()
             if isinstance(found.get(key), int | float)]
    return ", ".join(parts)


def _verdict(result: Result) -> Iterator[str]:
    yield from _title("Verdict and its rules")
    yield f"{WORDS[result.verdict]}"
    for judgement in result.judgements:
        where = f" ({judgement.place})" if judgement.place else ""
        rule = f"  Rule: {judgement.rule}." if judgement.rule else ""
        yield from textwrap.wrap(f"- {judgement.decision.value}: {judgement.what}{where}: {judgement.text}.{rule}",
                                 WIDTH, subsequent_indent="  ")


def _applied(meta: RunMeta, result: Result) -> Iterator[str]:
    yield from _title("Applied")
    sign = meta.polarity
    yield from _fields((("highest", f"{sign * result.highest_v / 1e3:.3f} kV (largest single reading while energised)"),
                        ("time on", f"{result.time_on_s:.2f} s")))
    for hold in result.holds:
        if hold.mean is None:
            yield from _field("hold", f"{hold.name}: no usable sample")
            continue
        over = f"; {hold.over_samples} samples above the tolerance, peak {sign * hold.peak_v / 1e3:.3f} kV" \
            if hold.over_samples else ""
        gap = f"; {hold.missing} samples missing" if hold.missing else ""
        kind = "in all" if hold.clock == "accumulate" else "unbroken"
        yield from _field("hold", (
            f"{hold.name}: mean {shown(hold.mean, 'kV', 1e-3, sign)} (k = 2, {hold.mean.relative * 100:.2g} %), asked "
            f"{sign * hold.level_v / 1e3:g} kV ± {hold.tolerance * 100:g} %; inside for {hold.inside_s:.2f} s {kind} "
            f"of {hold.asked_s:g} s; half of max - min {hold.ripple_v:.3g} V within the chain's "
            f"{_bandwidth(meta)}{over}{gap}"))
    if not result.holds:
        yield "no hold was begun"


def _bandwidth(meta: RunMeta) -> str:
    found = meta.bench.get("bandwidth_hz")
    return f"{found:g} Hz" if isinstance(found, int | float) and found else "bandwidth (not stated)"


def _leaked(meta: RunMeta, result: Result) -> Iterator[str]:
    if not result.readings and result.ramp is None:
        return
    yield from _title("Leaked")
    for reading in result.readings:
        name = f"at {reading.at_s:g} s"
        if reading.amps is None:
            yield from _field(name, f"{reading.hold}: not reached (from {reading.origin})")
            continue
        own = "the bench's own draw not known, not taken off" if reading.own_a is None else \
            f"the bench's own {reading.own_a * 1e6:.3g} µA taken off"
        at_least = reading.ohms_at_least
        ohms = f"; {shown(reading.ohms, 'MΩ', 1e-6)}" if reading.ohms is not None else ""
        ohms += f", at least {at_least / 1e6:.4g} MΩ" if at_least is not None else ""
        yield from _field(name, f"{reading.hold}: {shown(reading.amps, 'µA', 1e6, meta.polarity)}{ohms}; {own}; mean "
                                f"over {reading.window_s:g} s, from {reading.origin}")
    if result.ramp is not None:
        own_f = "own capacitance taken off" if result.ramp.own_f is not None else "own capacitance not known"
        yield from _field("capacitance", f"{shown(result.ramp.farads, 'pF', 1e12)} from the ramp {result.ramp.name!r} "
                                         f"at {result.ramp.rate_v_per_s:.4g} V/s, {own_f}")
    yield from _field("specimen", result.proof.text)


def _arced(meta: RunMeta, result: Result) -> Iterator[str]:
    yield from _title("Arced")
    if not result.breakdowns:
        yield "no disruptive discharge"
    for number, found in enumerate(result.breakdowns, start=1):
        stop = "no stop followed"
        if found.to_stop_s is not None:
            stop = f"stopped at most {found.to_stop_s * 1e3:.1f} ms after it began"
        yield from _field(f"breakdown {number}", (
            f"{shown(found.volts, 'kV', 1e-3, meta.polarity)} at {found.at_s:.3f} s (sample {found.index}), seen by "
            f"{' and '.join(found.seen_by)}, {stop}; {found.kind}"))


def _stopped(result: Result) -> Iterator[str]:
    yield from _title("Stopped")
    yield from _fields((("outcome", result.outcome), ("why", result.why), ("latched", ", ".join(result.causes))))


def _cautions(meta: RunMeta, result: Result) -> Iterator[str]:
    yield from _title("Cautions")
    bench = meta.bench
    said = [BEFORE_TOUCHING]
    if bench.get("programming_only"):
        said.append(f"After a cut this bench is {PROGRAMMED_TO_ZERO}.")
    elif bench.get("supply_stays_powered"):
        said.append("After a cut this bench is inhibited, supply still powered.")
    if bench.get("inhibits_without_mcu") is False:
        said.append(f"On this bench {NOT_INHIBITED_WITHOUT_MCU}.")
    if bench.get("arm_input") is False:
        said.append(f"{NO_ARM_INPUT[0].upper()}{NO_ARM_INPUT[1:]}.")
    if bench.get("monitor_at_specimen") is False:
        said.append("The voltage is not measured at the specimen.")
    if bench.get("monitor_powered_after_cut") is False:
        said.append(f"After a cut the voltage monitor has no power: the discharge was {NOT_MEASURED}.")
    said += [f"Under a reason: {r.get('what', '')}: {r.get('reason', '')} ({r.get('by', 'no name')})"
             for r in meta.reasons if isinstance(r, dict)]
    for text in said:
        yield from textwrap.wrap(f"- {text}", WIDTH, subsequent_indent="  ")


def _record(meta: RunMeta, result: Result, check: Check | None, revisions: tuple[Json, ...],
            damage: tuple[str, ...]) -> Iterator[str]:
    yield from _title("Record")
    sound = ""
    if check is not None:
        sound = "manifest and files agree" if check.sound else "not closed" if not check.closed else "NOT AS CLOSED"
    yield from _fields((
        ("samples", f"{result.pairs}, {result.missing} missing"),
        ("entries lost", str(result.entries_lost) if result.entries_lost else "none"), ("folder", sound),
        ("software", meta.software), ("tag", f"{meta.tag:08X}")))
    for fault in (*damage, *(check.faults if check is not None else ())):
        yield from textwrap.wrap(f"- {fault}", WIDTH, subsequent_indent="  ")
    for name in sorted(meta.hashes):
        yield from _field(name, f"SHA-256 {meta.hashes[name][:32]}…" if len(meta.hashes[name]) > 32
                          else meta.hashes[name])
    for revision in revisions:
        when, said = revision.get("utc_ns"), revision_text(revision)
        yield from _field(f"revision {revision.get('number', '?')}",
                          f"{revision.get('kind', '')}{', ' + utc_text(when) if isinstance(when, int) else ''}"
                          f"{': ' + said if said else ''}")
