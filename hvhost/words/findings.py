"""Graded findings: what a check found, where, and what it asks for.

*refuse* is never overridden; *reason needed* goes on the record with a name; *note* informs.
"""

from dataclasses import dataclass
from enum import StrEnum


class Grade(StrEnum):
    """How much a finding asks for."""

    REFUSE = "refuse"
    REASON = "reason needed"
    NOTE = "note"


@dataclass(frozen=True, slots=True, kw_only=True)
class Finding:
    """One fault or remark about one place in one file (``line`` counts from 1, 0 where no line applies)."""

    grade: Grade
    file: str
    line: int
    what: str
    expected: str = ""
    found: str = ""
    remedy: str = ""

    @property
    def text(self) -> str:
        """One printable line: place, grade, field, expected, found, remedy."""
        place = f"{self.file}:{self.line}" if self.line else self.file
        body = f"{place}: {self.grade}: {self.what}"
        if self.expected:
            body += f": expected {self.expected}"
        if self.found:
            body += f", found {self.found}" if self.expected else f": found {self.found}"
        return f"{body}; {self.remedy}" if self.remedy else body


def refused(findings: tuple[Finding, ...] | list[Finding]) -> tuple[Finding, ...]:
    """Return the findings that refuse."""
    return tuple(f for f in findings if f.grade is Grade.REFUSE)


def reasons(findings: tuple[Finding, ...] | list[Finding]) -> tuple[Finding, ...]:
    """Return the findings that need a reason with a name on the record."""
    return tuple(f for f in findings if f.grade is Grade.REASON)
