"""Verdicts as values."""

from hvhost.guard.guard import Guard
from hvhost.guard.verdicts import Severity
from tests.guard.build import block, limits


def test_a_verdict_carries_what_produced_it() -> None:
    """Rule, severity, limit, measured value, sample index, tick and a sentence; equal where these are."""
    v, i = [0] * 8, [5000] * 8
    (one,), (two,) = Guard(limits()).judge(block(8, v, i)), Guard(limits()).judge(block(8, v, i))
    assert one == two
    assert (one.limit, one.measured, one.index, one.tick) == (3000, 5000, 9, 90)
    assert one.text
    assert [str(s) for s in Severity] == ["trip", "arc", "event"]
