"""Graded findings as one printable line."""

from hvhost.words.findings import Finding, Grade, reasons, refused


def _finding(grade: Grade = Grade.REFUSE, line: int = 3, **parts: str) -> Finding:
    return Finding(grade=grade, file="b.yaml", line=line, what="supply.voltage", **parts)


def test_one_line() -> None:
    """Place, grade, key, expected, found, remedy; empty parts are left out."""
    assert _finding(expected="25 kV", found="25 KV", remedy="mend it").text == (
        "b.yaml:3: refuse: supply.voltage: expected 25 kV, found 25 KV; mend it")
    assert _finding(grade=Grade.NOTE, line=0, found="soon").text == "b.yaml: note: supply.voltage: found soon"
    assert _finding(grade=Grade.REASON).text == "b.yaml:3: reason needed: supply.voltage"


def test_by_grade() -> None:
    """Refusing findings and those that need a reason are picked out in order."""
    every = [_finding(grade) for grade in Grade]
    assert refused(every) == (every[0],)
    assert reasons(every) == (every[1],)
