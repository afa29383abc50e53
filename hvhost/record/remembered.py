"""The catalogue kept in memory, for whoever asks often and must not wait: only folders that changed are read again.

A thousand small files take a third of a second to read, which an event loop has not got; looking whether they changed
takes a few milliseconds.  A folder changed when a name in it did (every file of a run is written beside its place and
renamed into it) or when a revision was added.
"""

import os
from pathlib import Path

from hvhost.record.catalogue import RunSummary, summary_of
from hvhost.record.folder import BLOCKS, META, REVISIONS, RunFolder

Mark = tuple[int, int]


class RememberedRuns:
    """The runs under one folder; each call looks again and reads what is new."""

    def __init__(self, root: Path) -> None:
        self.root = root
        self._known: dict[str, tuple[Mark, RunSummary]] = {}

    def runs(self) -> tuple[RunSummary, ...]:
        """Return every run, oldest first, as `catalogue.list_runs` does."""
        try:
            with os.scandir(self.root) as entries:
                names = sorted(one.name for one in entries if not one.name.startswith("."))
        except OSError:
            names = []
        found: dict[str, tuple[Mark, RunSummary]] = {}
        for name in names:
            one = self._one(name)
            if one is not None:
                found[name] = one
        self._known = found
        return tuple(summary for _, summary in found.values())

    def _one(self, name: str) -> tuple[Mark, RunSummary] | None:
        path = self.root / name
        mark = _mark(f"{self.root}{os.sep}{name}")
        known = self._known.get(name)
        if mark is None or (known is not None and known[0] == mark):
            return known if mark is not None else None
        if not ((path / BLOCKS).exists() or (path / META).exists()):
            return None
        return mark, summary_of(RunFolder(path))


def _mark(path: str) -> Mark | None:
    """What tells that a folder changed; None where there is none."""
    try:
        own = os.stat(path).st_mtime_ns
    except OSError:
        return None
    try:
        return own, os.stat(path + os.sep + REVISIONS).st_mtime_ns
    except OSError:
        return own, 0
