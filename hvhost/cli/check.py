"""``hvhost check FILE...``: every fault of bench files, plans and run sheets, in one go."""

import argparse
import json
import sys
from datetime import UTC, date, datetime
from pathlib import Path

from hvhost.bench.file import check_bench
from hvhost.cli import exits
from hvhost.plan.language import check_plan
from hvhost.plan.sheet import check_sheet
from hvhost.words.errors import FileFault
from hvhost.words.findings import Finding, Grade
from hvhost.words.sniff import sniff_kind
from hvhost.words.textfile import read_text

ABOUT = """Checks each file by itself and says every fault with its line.  Given one bench, one plan and one run
sheet, the three are also preflighted against each other.  Silent where nothing is wrong."""


def run(argv: list[str]) -> int:
    """Print the findings; refused when any refuses."""
    parser = argparse.ArgumentParser(prog="hvhost check", description=ABOUT, epilog=exits.EPILOG)
    parser.add_argument("files", nargs="+", metavar="FILE")
    parser.add_argument("--notes", action="store_true", help="print notes too")
    parser.add_argument("--json", action="store_true", help="one JSON object a finding")
    options = parser.parse_args(argv)
    findings: list[Finding] = []
    kinds: dict[str, list[Path]] = {"bench": [], "plan": [], "sheet": []}
    today = datetime.now(UTC).date()
    for name in options.files:
        findings += _check(Path(name), kinds, today)
    if all(len(paths) == 1 for paths in kinds.values()) and not any(f.grade is Grade.REFUSE for f in findings):
        findings = _together(kinds, today)
    shown = [f for f in findings if options.notes or f.grade is not Grade.NOTE]
    for finding in shown:
        if options.json:
            print(json.dumps({"grade": str(finding.grade), "file": finding.file, "line": finding.line,
                              "what": finding.what, "expected": finding.expected, "found": finding.found,
                              "remedy": finding.remedy}))
        else:
            print(finding.text, file=sys.stderr if finding.grade is Grade.REFUSE else sys.stdout)
    return exits.REFUSED if any(f.grade is Grade.REFUSE for f in findings) else exits.PASSED


def _check(path: Path, kinds: dict[str, list[Path]], today: date) -> tuple[Finding, ...]:
    try:
        text = read_text(path)
    except FileFault as fault:
        return tuple(f for f in fault.findings if isinstance(f, Finding))
    kind = sniff_kind(text)
    if kind not in kinds:
        return (Finding(grade=Grade.REFUSE, file=str(path), line=1, what="file",
                        expected="a bench file (bench: ...), a plan (plan: ...) or a run sheet (sheet: ...)",
                        found=kind or "none of these", remedy="begin the file with one of these keys"),)
    kinds[kind].append(path)
    return check_bench(path, today) if kind == "bench" else {"plan": check_plan, "sheet": check_sheet}[kind](path)


def _together(kinds: dict[str, list[Path]], today: date) -> list[Finding]:
    from hvhost.bench.file import load_bench
    from hvhost.plan.language import load_plan
    from hvhost.plan.passing import History
    from hvhost.plan.preflight import preflight
    from hvhost.plan.sheet import load_sheet

    return [f for bench in kinds["bench"] for plan in kinds["plan"] for sheet in kinds["sheet"]
            for f in preflight(load_plan(plan), load_sheet(sheet), load_bench(bench, today), history=History(),
                               today=today).findings]
