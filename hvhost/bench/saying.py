"""How a check says what it found: grades, places, and quantities in messages."""

from typing import Protocol

from hvhost.words.findings import Finding, Grade
from hvhost.words.quantities import Dimension, format_quantity

SAME = 1e-9  # relative; a bound that was computed equals the typed value although a last bit differs
REASON, REFUSE, NOTE = Grade.REASON, Grade.REFUSE, Grade.NOTE


class Say(Protocol):
    """Makes a finding about one dotted place of the file."""

    def __call__(self, grade: Grade, place: str, expected: str, found: str, remedy: str = "") -> Finding:
        """The finding, with the line of the place."""
        ...


def volts(value: float) -> str:
    """A voltage in a message."""
    return format_quantity(value, Dimension.VOLT, 5)


def amps(value: float) -> str:
    """A current in a message."""
    return format_quantity(value, Dimension.AMP, 5)


def seconds(value: float) -> str:
    """A duration in a message."""
    return format_quantity(value, Dimension.SECOND, 5)


def joules(value: float) -> str:
    """An energy in a message."""
    return format_quantity(value, Dimension.JOULE, 3)


def delay_samples(delay_s: float, rate_hz: float) -> int:
    """Samples until the readback follows: the delay, rounded up, and one for the phase of sampling."""
    product = delay_s * rate_hz
    whole = int(product)
    return whole + (product > whole + SAME * max(1, whole)) + 1
