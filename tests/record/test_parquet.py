"""The Parquet file, read by other engines than the one that wrote it."""

from pathlib import Path

import duckdb
import numpy as np
import pandas as pd
import pyarrow.parquet as pq
import pytest

from hvhost.record.data import load_run
from hvhost.record.folder import RunFolder
from hvhost.record.parquet import COLUMNS, export, main
from hvhost.record.recovery import recover_run
from hvhost.report.closing import close_run
from tests.record.making import OPENED_NS, Case, made_meta, made_run


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> RunFolder:
    """A run with a gap of 100 pairs, exported."""
    made = made_run(tmp_path_factory.mktemp("runs"), Case(hold_s=3.0, lose=100))
    export(made)
    return made


def test_duckdb_reads_it_as_utc_with_as_many_rows_as_samples_less_the_gap(folder: RunFolder) -> None:
    """Outside check: a second engine finds the columns, the time zone, and every sample but the missing ones."""
    con = duckdb.connect()
    con.execute("SET TimeZone='UTC'")
    source = str(folder.path / "samples.parquet")
    types = dict(con.execute("SELECT column_name, column_type FROM (DESCRIBE SELECT * FROM read_parquet(?))",
                             [source]).fetchall())
    assert types["t"].startswith("TIMESTAMP")
    assert "ZONE" in types["t"] or "TZ" in types["t"]
    rows, first, last, span = con.execute(
        "SELECT count(*), min(\"index\"), max(\"index\"), epoch(max(t)) - epoch(min(t)) FROM read_parquet(?)",
        [source]).fetchone() or ()
    samples = last - first + 1
    assert rows == samples - 100
    assert span == pytest.approx((samples - 1) / 1000.0, abs=1e-3)
    (gap,) = con.execute("SELECT max(\"index\" - lag) FROM (SELECT \"index\", lag(\"index\") OVER (ORDER BY \"index\") "
                         "AS lag FROM read_parquet(?))", [source]).fetchone() or ()
    assert gap == 101


def test_pandas_reads_utc_and_the_sign_of_the_output(folder: RunFolder) -> None:
    """Outside check: pandas sees datetime64 in UTC, kilovolts with the bench's negative polarity, flags at the gap."""
    frame = pd.read_parquet(folder.path / "samples.parquet")
    assert str(frame["t"].dtype) == "datetime64[ns, UTC]"
    assert frame["t"].is_monotonic_increasing
    assert abs(frame["t"].iloc[0] - pd.Timestamp(OPENED_NS, tz="UTC")) < pd.Timedelta(milliseconds=1)
    held = frame[frame["v_set_kV"] < -9.9]
    assert held["voltage_kV"].mean() == pytest.approx(-10.0, abs=0.01)
    assert (frame["flags"] & 32 > 0).sum() == 1
    assert set(frame["state"]) == {"warning", "energised", "lowering", "off"}
    run = load_run(folder)
    assert np.allclose(frame["voltage_kV"], -run.volts() / 1e3, atol=1e-5)


def test_units_stand_in_names_and_in_metadata(folder: RunFolder) -> None:
    """Every physical column says its unit twice, and the file says which run it is."""
    schema = pq.read_schema(folder.path / "samples.parquet")
    for name, _, unit, text in COLUMNS:
        found = schema.field(name).metadata
        assert found[b"unit"] == unit.encode()
        assert found[b"description"] == text.encode()
        if unit in ("kV", "mA", "s"):
            assert name.endswith(f"_{unit}")
    assert schema.metadata[b"hvhost.samples_missing"] == b"100"
    assert schema.metadata[b"hvhost.run"] == b"0007"


def test_all_files_together_keep_the_bound(tmp_path: Path) -> None:
    """At rest a run of 1 k pairs/s takes at most 10 bytes a pair, block file, Parquet and texts together."""
    folder = made_run(tmp_path, Case(hold_s=50.0))
    assert close_run(folder).result.missing == 0
    total = sum(p.stat().st_size for p in folder.path.rglob("*") if p.is_file())
    assert total / (50_000 + 5_000 + 960 + 640) <= 10.0


@pytest.mark.parametrize("cut", [0, 900, 20_000])
def test_a_recovered_run_is_exported_as_far_as_it_reaches(tmp_path: Path, cut: int) -> None:
    """A torn file, even an empty one, gives a Parquet file of the samples that are whole."""
    folder = made_run(tmp_path, Case(hold_s=0.3, end=False))
    folder.blocks.write_bytes(folder.blocks.read_bytes()[:cut])
    recover_run(folder, utc_ns=1, seal=False)
    export(folder)
    assert len(pd.read_parquet(folder.path / "samples.parquet")) == load_run(folder).rows


def test_the_command_says_what_is_wrong(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """No run there: a sentence on the error output and a code, no traceback."""
    assert main([]) == 2
    assert main([str(tmp_path)]) == 7
    assert "expected a run folder" in capsys.readouterr().err
    folder = RunFolder.create(tmp_path, "1", OPENED_NS, made_meta().to_json(), {})
    assert main([str(folder.path)]) == 0
