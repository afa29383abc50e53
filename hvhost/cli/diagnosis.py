"""What `hvhost diagnose` says: one line for each thing looked at, and what to do where it is not as it should be."""

from dataclasses import asdict, dataclass
from enum import StrEnum
from typing import Any


class Verdict(StrEnum):
    """How a thing was found."""

    OK = "ok"
    NOTE = "note"  # worth knowing, nothing to do
    ATTENTION = "attention"  # the bench can be used, but not as well as it might
    FAULT = "fault"  # the bench cannot be used
    UNKNOWN = "unknown"  # this machine does not tell


@dataclass(frozen=True, slots=True, kw_only=True)
class Check:
    """One thing looked at: its name, how it was found, what was found, and the remedy ('' where none is needed)."""

    name: str
    verdict: Verdict
    found: str
    remedy: str = ""

    @property
    def text(self) -> str:
        """One line for people."""
        tail = f"; {self.remedy}" if self.remedy else ""
        return f"{self.verdict:<10} {self.name}: {self.found}{tail}"

    def to_json(self) -> dict[str, Any]:
        """Plain values."""
        return {**asdict(self), "verdict": str(self.verdict)}


def ok(name: str, found: str) -> Check:
    """As it should be."""
    return Check(name=name, verdict=Verdict.OK, found=found)


def note(name: str, found: str, remedy: str = "") -> Check:
    """Worth knowing."""
    return Check(name=name, verdict=Verdict.NOTE, found=found, remedy=remedy)


def attention(name: str, found: str, remedy: str) -> Check:
    """Usable, but not as well as it might be."""
    return Check(name=name, verdict=Verdict.ATTENTION, found=found, remedy=remedy)


def fault(name: str, found: str, remedy: str) -> Check:
    """Not usable."""
    return Check(name=name, verdict=Verdict.FAULT, found=found, remedy=remedy)


def unknown(name: str, found: str) -> Check:
    """Nobody tells."""
    return Check(name=name, verdict=Verdict.UNKNOWN, found=found)
