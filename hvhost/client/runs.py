"""Runs and their records as arrays, read from the runs folder itself: no daemon is needed."""

import json
from collections.abc import Iterator, Mapping
from functools import cached_property
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hvhost.record.catalogue import RunSummary, find_run, list_runs, summary_of
from hvhost.record.columns import OTHER_STATE, STATES, Column, columns_of
from hvhost.record.data import RunData, load_run
from hvhost.record.folder import RESULT, RunFolder
from hvhost.record.manifest import check_folder, revisions_of
from hvhost.record.meta import RunMeta
from hvhost.record.where import where as parsed
from hvhost.report.resultfile import corrected_document
from hvhost.words.errors import CommandRefused, RecordFault

WORDS = np.array([*STATES, OTHER_STATE])


class Record(Mapping[str, NDArray[Any]]):
    """One run: its samples as arrays by name, units in the names, values with the output's sign.

    ``t`` (datetime64, UTC), ``tick``, ``index``, ``host_s``, ``voltage_kV``, ``current_mA``, ``v_set_kV``,
    ``i_set_mA``, ``state`` (words), ``latched``, ``inputs``, ``arc``, ``flags``; see FORMAT.md, section 7.
    """

    def __init__(self, folder: RunFolder) -> None:
        self.folder = folder.path
        self._folder = folder

    @property
    def summary(self) -> RunSummary:
        """Its line in the catalogue, corrections included."""
        return summary_of(self._folder)

    @cached_property
    def data(self) -> RunData:
        """The record with its codes, notes and events."""
        return load_run(self._folder)

    @property
    def meta(self) -> RunMeta:
        """What was fixed before the run."""
        return self.data.meta

    @property
    def result(self) -> dict[str, Any]:
        """``result.json`` with every later correction; raises `RecordFault` where there is none."""
        try:
            document = json.loads((self.folder / RESULT).read_bytes())
        except (OSError, ValueError):
            document = None
        if not isinstance(document, dict):
            raise RecordFault("a closed run with a result", "none", str(self.folder / RESULT))
        return corrected_document(document, revisions_of(self._folder))

    @property
    def faults(self) -> tuple[str, ...]:
        """Every file that is not as it was closed; empty where the folder is sound."""
        return check_folder(self._folder).faults

    @cached_property
    def arrays(self) -> dict[str, NDArray[Any]]:
        """Every column."""
        columns: dict[str, Column] = columns_of(self.data, 0, self.data.rows)
        state = WORDS[columns["state"].astype(np.int64)]
        return {**columns, "t": columns["t"].astype("datetime64[ns]"), "state": state}

    def __getitem__(self, name: str) -> NDArray[Any]:
        return self.arrays[name]

    def __iter__(self) -> Iterator[str]:
        return iter(self.arrays)

    def __len__(self) -> int:
        return len(self.arrays)

    def __repr__(self) -> str:
        return f"Record({self._folder.name!r})"


class Runs:
    """All runs under one folder."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder

    def list(self, where: str = "") -> tuple[RunSummary, ...]:
        """The catalogue, oldest first; ``where`` as in ``hvhost runs --where``."""
        fits = parsed(where) if where.strip() else None
        return tuple(run for run in list_runs(self.folder) if fits is None or fits(run))

    def record(self, name: str = "last") -> Record:
        """One run by its number, its folder's name, a unique beginning of either, or 'last'."""
        return Record(find_run(self.folder, name))


def open_runs(folder: str | Path = "runs") -> Runs:
    """Return the runs under a folder; raises `CommandRefused` where there is none."""
    path = Path(folder).expanduser()
    if not path.is_dir():
        raise CommandRefused("a runs folder", "none", str(path))
    return Runs(path)
