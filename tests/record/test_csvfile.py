"""Samples as CSV: read back by pandas under two locales' forms, equal to the Parquet, in bounded pieces."""

import io
from datetime import datetime
from pathlib import Path
from zoneinfo import ZoneInfo

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from hvhost.record.csvfile import write_csv
from hvhost.record.csvform import CsvForm
from hvhost.record.parquet import export
from hvhost.words.errors import CommandRefused
from tests.record.making import Case, made_run

GERMAN = CsvForm(decimal=",", separator=";", zone="Europe/Berlin")
ENGLISH = CsvForm(decimal=".", separator=",", zone="Europe/London")


@pytest.fixture(scope="module")
def source(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The Parquet of one run."""
    return export(made_run(tmp_path_factory.mktemp("runs"), Case(hold_s=0.4, break_at_s=0.3)))


def written(source: Path, form: CsvForm, columns: tuple[str, ...] = ()) -> bytes:
    """The CSV."""
    out = io.BytesIO()
    assert write_csv(source, out, form, columns) == pq.read_metadata(source).num_rows
    return out.getvalue()


@pytest.mark.parametrize("form", [GERMAN, ENGLISH], ids=["German", "English"])
def test_pandas_reads_back_what_the_parquet_holds(source: Path, form: CsvForm) -> None:
    """Every value comes back as it was, with the locale's decimal mark and separator; times are the same moments."""
    read = pd.read_csv(io.BytesIO(written(source, form)), sep=form.separator, decimal=form.decimal, parse_dates=["t"])
    wanted = pq.read_table(source).to_pandas()
    assert list(read.columns) == list(wanted.columns)
    for name in wanted.columns:
        if name == "t":
            assert (read[name].astype("datetime64[ns, UTC]") == wanted[name]).all()
        elif name == "state":
            assert (read[name] == wanted[name].astype(str)).all()
        elif wanted[name].dtype == np.float32:
            assert (read[name].astype(np.float32) == wanted[name]).all()
        else:
            assert (read[name] == wanted[name].astype(read[name].dtype)).all()


def test_the_header_has_units_and_the_times_their_offset(source: Path) -> None:
    """What a person sees in a spreadsheet's first two lines."""
    header, first = written(source, GERMAN).decode("ascii").splitlines()[:2]
    assert header == ("t;tick;index;host_s;voltage_kV;current_mA;v_set_kV;i_set_mA;state;latched;inputs;arc;flags")
    assert first.startswith("2027-01-15T09:00:00.000000000+01:00;0;0;100,0")
    english = written(source, ENGLISH).decode("ascii").splitlines()[1]
    assert english.startswith("2027-01-15T08:00:00.000000000+00:00,0,0")


def test_chosen_columns_come_in_the_order_asked_for(source: Path) -> None:
    """A spreadsheet with two columns needs no more; a misspelt one is told."""
    lines = written(source, GERMAN, ("voltage_kV", "t")).decode("ascii").splitlines()
    assert lines[0] == "voltage_kV;t"
    with pytest.raises(CommandRefused, match="did you mean 'voltage_kV'"):
        written(source, GERMAN, ("voltage_kv",))
    with pytest.raises(CommandRefused, match="each column once"):
        written(source, GERMAN, ("t", "t"))


def test_the_offset_changes_where_summer_time_ends(tmp_path: Path) -> None:
    """Two o'clock comes twice in that night, told apart by the offset alone."""
    zone = ZoneInfo("Europe/Berlin")
    begin = int(datetime(2027, 10, 31, 2, 59, 58, tzinfo=zone).timestamp()) * 1_000_000_000
    t = pa.array([begin + k * 500_000_000 for k in range(8)], pa.int64()).cast(pa.timestamp("ns", tz="UTC"))
    pq.write_table(pa.table({"t": t, "voltage_kV": pa.array(np.arange(8, dtype=np.float32))}), tmp_path / "x.parquet")
    lines = written(tmp_path / "x.parquet", GERMAN).decode().splitlines()[1:]
    assert [line[11:13] + line[29:35] for line in lines] == ["02+02:00"] * 4 + ["02+01:00"] * 4
    assert lines[4].startswith("2027-10-31T02:00:00.000000000+01:00")


def test_progress_is_told_and_a_long_file_is_never_whole_in_memory(source: Path, tmp_path: Path) -> None:
    """Row groups come and go one after the other."""
    table = pq.read_table(source)
    pq.write_table(pa.concat_tables([table] * 30), tmp_path / "long.parquet", row_group_size=1 << 16)
    told: list[tuple[int, int]] = []
    out = io.BytesIO()
    before = pa.total_allocated_bytes()
    rows = write_csv(tmp_path / "long.parquet", out, GERMAN, (), lambda done, total: told.append((done, total)))
    assert rows == 30 * table.num_rows
    assert told[-1] == (rows, rows)
    assert len(told) > 2
    assert pa.total_allocated_bytes() - before < 30 << 20


def test_an_empty_run_is_a_header(tmp_path: Path) -> None:
    """A run that was cancelled before its first sample exports too."""
    empty = {"t": pa.array([], pa.timestamp("ns", tz="UTC")), "voltage_kV": pa.array([], pa.float32())}
    pq.write_table(pa.table(empty), tmp_path / "x.parquet")
    assert written(tmp_path / "x.parquet", GERMAN) == b"t;voltage_kV\n"
