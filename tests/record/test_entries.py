"""The words of the record."""

from hvhost.record.entries import EntryKind, Outcome
from hvhost.record.layout import _DECODERS
from hvhost.supervisor.runs import Outcome as RunOutcome


def test_every_kind_has_a_number_of_its_own_and_a_reader() -> None:
    """No kind is written that cannot be read."""
    assert set(_DECODERS) == set(EntryKind)
    assert [int(kind) for kind in EntryKind] == list(range(1, 12))


def test_outcomes_are_the_words_that_the_supervisor_uses() -> None:
    """Record and supervisor name an ending alike."""
    assert {o.value for o in RunOutcome} <= {o.value for o in Outcome}
