"""Runs as arrays: the Parquet's columns without Parquet, corrections included."""

from pathlib import Path

import numpy as np
import pandas as pd
import pyarrow.parquet as pq
import pytest

from hvhost.client import CommandRefused, open_runs
from hvhost.record.amend import amend
from hvhost.record.folder import RunFolder
from hvhost.report.closing import close_run
from hvhost.words.errors import RecordFault
from tests.record.making import Case, made_run


def test_a_record_is_arrays_with_units_in_their_names(tmp_path: Path) -> None:
    """The same numbers as the Parquet, times as datetimes, states as words; pandas takes it as it is."""
    folder = made_run(tmp_path, Case(hold_s=0.3, break_at_s=0.2))
    close_run(folder)
    record = open_runs(tmp_path).record()
    table = pq.read_table(folder.path / "samples.parquet").to_pandas()
    assert list(record) == list(table.columns)
    assert (record["voltage_kV"] == table["voltage_kV"].to_numpy()).all()
    assert record["t"].dtype == np.dtype("datetime64[ns]")
    assert (record["t"].astype(np.int64) == table["t"].astype(np.int64)).all()
    assert (record["state"] == table["state"].astype(str).to_numpy()).all()
    assert len(pd.DataFrame(dict(record))) == len(table)
    assert record["voltage_kV"][record["state"] == "energised"].min() < -9.5
    assert record.faults == ()
    assert record.meta.polarity == -1
    assert "0007" in repr(record)
    assert len(record) == len(table.columns)


def test_the_result_and_the_catalogue_follow_corrections(tmp_path: Path) -> None:
    """A script sees what the page shows."""
    close_run(made_run(tmp_path, Case(hold_s=0.2)))
    runs = open_runs(str(tmp_path))
    assert runs.record("0007").result["specimen"] == "S-1"
    amend(RunFolder(runs.record().folder), {"specimen": "S-2"}, reason="misread", by="operator A", utc_ns=1)
    assert runs.record("0007").result["specimen"] == runs.record("0007").summary.specimen == "S-2"
    assert [run.run for run in runs.list("specimen = S-2")] == ["0007"]
    assert runs.list("specimen = S-1") == ()
    assert len(runs.list()) == 1


def test_what_is_not_there_is_a_sentence(tmp_path: Path) -> None:
    """No folder, no run, no result yet."""
    with pytest.raises(CommandRefused, match="a runs folder"):
        open_runs(tmp_path / "absent")
    with pytest.raises(CommandRefused, match="one run named"):
        open_runs(tmp_path).record("x")
    made_run(tmp_path, Case(hold_s=0.1))
    with pytest.raises(RecordFault, match="a closed run with a result"):
        _ = open_runs(tmp_path).record().result
