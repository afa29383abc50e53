"""Silence is a journal too."""

import inspect

from hvhost.supervisor.journal import Journal, NoJournal


def test_no_journal_takes_all_that_a_journal_takes() -> None:
    """Same methods, same arguments."""
    for name, method in inspect.getmembers(Journal, inspect.isfunction):
        if not name.startswith("_"):
            assert inspect.signature(method).parameters.keys() == inspect.signature(
                getattr(NoJournal, name)).parameters.keys()
