"""Reading a bench file: text to ``Bench``, whole or not at all, every fault in one go.

``check_bench`` never raises for bad content; ``load_bench`` raises FileFault with the same findings.
"""

import hashlib
from datetime import date
from pathlib import Path
from typing import Any

from hvhost.bench.build import bench_of
from hvhost.bench.checks import cross_findings, date_findings
from hvhost.bench.document import BenchFile
from hvhost.bench.model import Bench
from hvhost.words.errors import FileFault, WireFault
from hvhost.words.findings import Finding, Grade, refused
from hvhost.words.sniff import other_kind
from hvhost.words.textfile import Reading, read_model, read_text


def load_bench(path: Path, today: date | None = None) -> Bench:
    """Read a bench file; ``today`` lets it judge the calibration's last day.

    Raises FileFault whose ``findings`` hold every fault, also where the file cannot be read at all.
    """
    return bench_from(path.name, read_text(path), today, place=str(path))


def bench_from(name: str, text: str, today: date | None = None, place: str = "") -> Bench:
    """The same from a text, as a record keeps it."""
    bench, findings = _read(name, text, today)
    if bench is None:
        faults = refused(findings)
        first = faults[0]
        more = f" and {len(faults) - 1} more" if len(faults) > 1 else ""
        raise FileFault("a bench file without faults", f"{len(faults)} ({first.text}{more})", place or name,
                        "'hvhost check' lists them all", findings=findings)
    return bench


def check_bench(path: Path, today: date | None = None) -> tuple[Finding, ...]:
    """Every finding about a bench file, faults first by line; empty for a file that needs nothing said."""
    try:
        text = read_text(path)
    except FileFault as fault:
        return tuple(f for f in fault.findings if isinstance(f, Finding))
    return check_text(path.name, text, today)


def check_text(name: str, text: str, today: date | None = None) -> tuple[Finding, ...]:
    """The same from a text."""
    return _read(name, text, today)[1]


def _read(name: str, text: str, today: date | None) -> tuple[Bench | None, tuple[Finding, ...]]:
    if other := other_kind(name, text, "bench"):
        return None, other
    reading = read_model(BenchFile, name, text)
    findings = list(reading.findings)
    if reading.root.entries:
        findings.extend(cross_findings(reading))
    if reading.model is not None and today is not None and reading.model.calibration is not None:
        findings.extend(date_findings(reading.model.calibration.valid_until, today, name,
                                      reading.line_of("calibration", "valid_until")))
    ordered = tuple(sorted(findings, key=lambda f: (f.line, f.what, f.expected)))
    if reading.model is None or refused(ordered):
        return None, ordered
    return _built(reading, reading.model, text, ordered)


def _built(reading: Reading[BenchFile], model: BenchFile, text: str,
           findings: tuple[Finding, ...]) -> tuple[Bench | None, tuple[Finding, ...]]:
    """The bench, proven to give settings that the MCU can hold; a value out of its range becomes a finding."""
    bench = bench_of(model, file=reading.file, text=text, sha256=hashlib.sha256(text.encode()).hexdigest(),
                     findings=findings)
    try:
        bench.settings()
    except WireFault as fault:
        unfit = Finding(grade=Grade.REFUSE, file=reading.file, line=0, what=fault.where, expected=fault.expected,
                        found=fault.found, remedy="what the file asks for does not fit into the MCU's settings")
        return None, (unfit, *findings)
    return bench, findings


def bench_schema() -> dict[str, Any]:
    """JSON Schema (2020-12) of a bench file, for editors."""
    return {"$schema": "https://json-schema.org/draft/2020-12/schema", **BenchFile.model_json_schema()}
