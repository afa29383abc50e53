"""What no single key can tell: combinations that are refused, that need a reason, or that are worth a note.

Each check is a generator over the file as far as its values were right; a value that was wrong has been told already
and ends only the checks that need it.  S-numbers are the safety rules of the developers' page.
"""

from collections.abc import Callable, Iterator
from datetime import date

from hvhost.bench.archive import check_archive
from hvhost.bench.broker import check_mqtt
from hvhost.bench.document import BenchFile
from hvhost.bench.instrument import check_instrument
from hvhost.bench.range_checks import RANGE_CHECKS
from hvhost.bench.safety_checks import SAFETY_CHECKS
from hvhost.bench.saying import NOTE, REASON, Say
from hvhost.words.findings import Finding, Grade
from hvhost.words.modelpaths import Absent
from hvhost.words.textfile import Reading

EXPIRES_SOON_DAYS = 30  # long enough to have a chain calibrated

Check = Callable[[BenchFile, Say], Iterator[Finding]]
CHECKS: tuple[Check, ...] = (*SAFETY_CHECKS, *RANGE_CHECKS, check_mqtt, check_instrument, check_archive)


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
