"""What the guard says: one verdict per rule that judged, with everything that produced it."""

from dataclasses import dataclass
from enum import StrEnum

from hvhost.wire.vocabulary import HostRule


class Severity(StrEnum):
    """What a verdict asks for: TRIP a cut, ARC the request `arc`, EVENT an entry in the record."""

    TRIP = "trip"
    ARC = "arc"
    EVENT = "event"


@dataclass(frozen=True, slots=True, kw_only=True)
class Verdict:
    """A rule's judgement at one sample.

    ``limit`` and ``measured`` are the integers that were compared (codes, samples, milliseconds or a mask, as the
    rule says), so that a replay gives the same ones; ``text`` says them in SI units.  ``index`` and ``tick`` are
    those of the deciding sample, the last one that the rule needed.
    """

    rule: HostRule
    severity: Severity
    limit: int
    measured: int
    index: int
    tick: int
    text: str
