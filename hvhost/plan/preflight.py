"""Checks plan x run sheet x bench x calibration before anything is live.

What it passed - the hashes of exactly these four - is what may be armed.
"""

from collections.abc import Mapping
from datetime import date

from hvhost.bench.model import Bench
from hvhost.plan.bookkeeping import BOOKKEEPING
from hvhost.plan.case import Case
from hvhost.plan.compiler import compiled, direct_program
from hvhost.plan.passing import History, Preflight, text_hash
from hvhost.plan.physics import PHYSICS
from hvhost.plan.plan import Plan, RunSheet
from hvhost.words.findings import Finding, Grade, refused

__all__ = ["History", "Preflight", "calibration_text", "preflight", "preflight_direct"]

TICK_HZ, QUEUE = 10_000, 16  # where no MCU has been asked yet
_ORDER = {Grade.REFUSE: 0, Grade.REASON: 1, Grade.NOTE: 2}


def preflight(plan: Plan, sheet: RunSheet, bench: Bench, *, history: History, today: date | None = None,
              tick_hz: int = TICK_HZ, queue: int = QUEUE) -> Preflight:
    """Return every finding, the program where nothing refuses, and the hashes of what was looked at."""
    program, findings = compiled(plan, sheet, bench)
    every = [*plan.findings, *sheet.findings, *findings, *bench.findings]
    if program is not None:
        case = Case(plan=plan, sheet=sheet, bench=bench, program=program, history=history, today=today,
                    tick_hz=tick_hz, queue=queue)
        every += [finding for check in (*PHYSICS, *BOOKKEEPING) for finding in check(case)]
    told = _once(every)
    return Preflight(findings=told, program=None if refused(told) else program,
                     hashes=_hashes(plan.sha256, sheet.sha256, bench))


def preflight_direct(bench: Bench, sheet: RunSheet, *, today: date | None = None) -> Preflight:
    """Return the preflight of a direct run: the bench's own findings, its calibration, and the implicit plan."""
    program = direct_program(bench)
    expired = bench.calibration_valid_until is not None and today is not None and bench.calibration_valid_until < today
    every = [*bench.findings, *sheet.findings]
    if expired and not any(finding.what.startswith("calibration") for finding in every):
        every.append(Finding(grade=Grade.REASON, file=bench.file, line=0, what="calibration.valid_until",
                             expected=f"a day not before today, {today}", found=str(bench.calibration_valid_until)))
    told = _once(every)
    return Preflight(findings=told, program=None if refused(told) else program,
                     hashes=_hashes(text_hash(repr(program)), sheet.sha256, bench))


def calibration_text(bench: Bench) -> str:
    """Return the calibration in force as text: what is hashed, and kept with a run."""
    lines = [f"certificate {bench.calibrated or 'none'}",
             f"valid until {bench.calibration_valid_until or 'not stated'}"]
    for name, channel in (("voltage", bench.voltage), ("current", bench.current)):
        for way, scale in (("program", channel.program), ("monitor", channel.monitor)):
            lines.append(f"{name} {way} gain {scale.gain!r} zero {scale.zero!r} u_gain {scale.u_gain!r} "
                         f"u_zero {scale.u_zero!r} codes {scale.code_low} to {scale.code_high} from {scale.source}")
    return "\n".join(lines) + "\n"


def _hashes(plan: str, sheet: str, bench: Bench) -> Mapping[str, str]:
    return {"plan": plan, "sheet": sheet, "bench": bench.sha256, "calibration": text_hash(calibration_text(bench))}


def _once(findings: list[Finding]) -> tuple[Finding, ...]:
    """Each place once for each thing that is wrong with it (a repeat unrolls a fault many times), gravest first."""
    kept: dict[tuple[str, int, str, str], Finding] = {}
    for finding in findings:
        what = finding.what.partition(":")[0].rstrip("0123456789 ") + finding.what.partition(":")[2]
        kept.setdefault((finding.file, finding.line, what, finding.grade), finding)
    return tuple(sorted(kept.values(), key=lambda f: (_ORDER[f.grade], f.file, f.line)))
