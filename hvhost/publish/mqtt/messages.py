"""From snapshots to payloads: pure functions, one for each topic that is sent.

A payload is a flat dict of plain values; :func:`encode` makes the bytes and is the last guard against what no JSON
reader takes.  The polarity's sign is put on here, since a payload leaves the program.
"""

import json
import math
from typing import Any

from hvhost.bench.model import Bench
from hvhost.publish.mqtt.telemetry import Interval
from hvhost.publish.snapshot import LinkState, Permission, Phase, Snapshot

Payload = dict[str, Any]
DIGITS = 8  # significant digits: finer than any converter, short on the wire
TEXT_MOST = 500  # characters, as the schemas say
PHASES = {Phase.RAMP: "ramp", Phase.HOLD: "hold", Phase.RETREAT: "retreat", Phase.REST: "rest"}


def encode(payload: Payload) -> bytes:
    """The payload as it is sent; raises ValueError for a number that is not finite."""
    return json.dumps(payload, allow_nan=False, ensure_ascii=False, separators=(",", ":")).encode("utf-8", "replace")


def number(value: float, scale: float = 1.0) -> float:
    """A value in the unit of its key (``scale`` units to one SI unit), without the noise of binary fractions."""
    return float(f"{value * scale:.{DIGITS}g}")


def text(value: str) -> str:
    """A text as long as the schemas allow."""
    return value if len(value) <= TEXT_MOST else value[: TEXT_MOST - 1] + "…"


def state_word(snapshot: Snapshot) -> str:
    """What the bench does in one word; 'unknown' where there is no fresh reading to say so (S13)."""
    if snapshot.link not in (LinkState.GREETED, LinkState.OBSERVE) or snapshot.reading is None:
        return "unknown"
    if snapshot.permission is Permission.RUNNING:
        return PHASES.get(snapshot.phase, "running")
    return str(snapshot.permission)


def state_of(snapshot: Snapshot) -> Payload:
    """The state without stamp and session."""
    word = state_word(snapshot)
    known = word != "unknown"
    payload: Payload = {
        "available": True, "state": word, "rehearsal": snapshot.rehearsal, "link": str(snapshot.link),
        "voltage": str(snapshot.voltage) if known else "unknown",
        "power": text(snapshot.power_words) if known else "",
        "latched": text("; ".join(snapshot.latched)), "stop": str(snapshot.stop), "control": text(snapshot.seat),
        "verdict": text(snapshot.verdict_text)}
    run = snapshot.run
    if run is not None:
        payload |= {"run": text(run.run_id), "plan": text(run.plan), "specimen": text(run.specimen),
                    "step": run.step_number, "step_total": run.step_total, "step_text": text(run.step_text)}
    if snapshot.pause_s is not None and math.isfinite(snapshot.pause_s):
        payload["re_energises_in_s"] = round(snapshot.pause_s, 1)
    return payload


def death_of(session: str, utc_ns: int, seq: int, why: str) -> Payload:
    """The Last Will, or the last words of an orderly end: nobody knows what the output does now."""
    return {"t": utc_ns, "seq": seq, "session": session, "available": False, "state": "unknown", "alarm": text(why)}


def description_of(bench: Bench, program: str, telemetry_s: float, commands: bool) -> Payload:
    """What the bench is, without stamp and session."""
    return {"bench": bench.name, "title": text(bench.title), "program": program, "polarity": bench.polarity,
            "voltage_highest_kV": number(bench.polarity * bench.v_max, 1e-3),
            "current_highest_mA": number(bench.polarity * bench.i_max, 1e3),
            "telemetry_interval_s": telemetry_s, "commands": commands}


def telemetry_of(snapshot: Snapshot, interval: Interval) -> Payload:
    """One interval with the newest set-points and state; without stamp and session."""
    span, reading, sign = interval.span, snapshot.reading, snapshot.polarity
    payload: Payload = {"interval_s": round(interval.span_s, 3), "pairs": span.pairs, "state": state_word(snapshot),
                        "quality": _quality(interval)}
    if span.pairs:
        payload |= _signed("voltage", "kV", sign * 1e-3, span.volts_min, span.volts, span.volts_max)
        payload |= _signed("current", "mA", sign * 1e3, span.amps_min, span.amps, span.amps_max)
    if span.unseen:
        payload["pairs_unseen"] = span.unseen
    if reading is not None:
        payload |= _known("voltage_u_kV", reading.u_volts, 1e-3) | _known("current_u_mA", reading.u_amps, 1e3)
        if reading.flags:
            payload["flags"] = text("; ".join(reading.flags))
        payload |= _known("voltage_set_kV", snapshot.set_volts, sign * 1e-3)
        payload |= _known("current_set_mA", snapshot.set_amps, sign * 1e3)
    return payload


def _quality(interval: Interval) -> str:
    if not interval.span.pairs:
        return "none"
    if interval.span.gap or interval.span.unseen:
        return "gap"
    return "flagged" if interval.span.flagged else "good"


def _signed(what: str, unit: str, scale: float, *values: float | None) -> Payload:
    """Least, mean, greatest with the polarity's sign: a negative bench's least is its greatest magnitude."""
    ordered = values if scale > 0 else values[::-1]
    payload: Payload = {}
    for part, value in zip(("min", "mean", "max"), ordered, strict=True):
        payload |= _known(f"{what}_{part}_{unit}", value, scale)
    return payload


def _known(key: str, value: float | None, scale: float) -> Payload:
    return {} if value is None or not math.isfinite(value) else {key: number(value, scale)}
