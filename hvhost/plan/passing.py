"""What a preflight hands on: its findings, the program, and the hashes of exactly what it looked at."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from hashlib import sha256

from hvhost.plan.program import Program
from hvhost.words.findings import Finding, reasons, refused


def text_hash(text: str) -> str:
    """Return the SHA-256 of a text in UTF-8, in lower-case hexadecimal."""
    return sha256(text.encode("utf-8")).hexdigest()


@dataclass(frozen=True, slots=True, kw_only=True)
class History:
    """What earlier runs tell: the specimen IDs used, the last one, and whether the interlock opened since."""

    used_specimens: frozenset[str] = frozenset()
    last_specimen: str = ""
    interlock_opened_since: bool = True


@dataclass(frozen=True, slots=True, kw_only=True)
class Preflight:
    """The result of checking plan x run sheet x bench x calibration.

    ``program`` is None where something refuses.  ``hashes`` has 'plan', 'sheet', 'bench' and 'calibration'.
    """

    findings: tuple[Finding, ...]
    program: Program | None
    hashes: Mapping[str, str] = field(default_factory=dict)

    @property
    def passed(self) -> bool:
        """Whether this may be armed, given a reason for each finding that needs one."""
        return self.program is not None and not refused(self.findings)

    @property
    def reasons(self) -> tuple[Finding, ...]:
        """The findings that need a reason with a name on the record before arming."""
        return reasons(self.findings)

    @property
    def digest(self) -> str:
        """One hash over the four: what may be armed is exactly this."""
        return text_hash("".join(f"{name}={self.hashes[name]}\n" for name in sorted(self.hashes)))
