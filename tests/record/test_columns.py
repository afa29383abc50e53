"""A run's columns: one function behind Parquet, CSV and arrays."""

from pathlib import Path

import numpy as np
import pyarrow.parquet as pq

from hvhost.record.columns import OTHER_STATE, STATES, columns_of
from hvhost.record.data import load_run
from hvhost.record.parquet import COLUMNS, export
from tests.record.making import Case, made_run


def test_the_columns_are_those_of_the_parquet_in_any_pieces(tmp_path: Path) -> None:
    """Names, values and the output's sign agree, whole or cut anywhere."""
    folder = made_run(tmp_path, Case(hold_s=0.3, lose=7))
    run = load_run(folder)
    table = pq.read_table(export(folder))
    whole = columns_of(run, 0, run.rows)
    assert list(whole) == [name for name, *_ in COLUMNS] == table.column_names
    words = np.array([*STATES, OTHER_STATE])
    for name in whole:
        stored = table.column(name)
        if name == "t":
            assert (whole[name] == stored.cast("int64").to_numpy()).all()
        elif name == "state":
            assert words[whole[name].astype(int)].tolist() == stored.to_pylist()
        else:
            assert (whole[name] == stored.to_numpy()).all()
    assert whole["voltage_kV"].min() < -9.9  # a negative bench
    for a in (0, 1, run.rows // 3, run.rows - 1):
        part = columns_of(run, a, run.rows)
        assert all((part[name] == whole[name][a:]).all() for name in whole)
