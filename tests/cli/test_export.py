"""``hvhost export``: whole files under their names, from what was closed or else from the original."""

import io
import shutil
from pathlib import Path

import duckdb
import pandas as pd
import pyarrow.parquet as pq
import pytest

from hvhost.cli import main
from hvhost.cli.export import run
from hvhost.record.folder import RunFolder
from hvhost.record.parquet import export
from hvhost.report.closing import close_run
from hvhost.words.errors import RecordFault, UsageFault
from tests.record.making import Case, made_run


@pytest.fixture(scope="module")
def original(tmp_path_factory: pytest.TempPathFactory) -> RunFolder:
    """A closed run."""
    made = made_run(tmp_path_factory.mktemp("runs"), Case(hold_s=0.2))
    close_run(made)
    return made


@pytest.fixture
def folder(original: RunFolder, tmp_path: Path) -> RunFolder:
    """A copy of it."""
    return RunFolder(Path(shutil.copytree(original.path, tmp_path / "runs" / original.name)))


def test_csv_and_parquet_hold_the_samples_as_closed(tmp_path: Path, folder: RunFolder) -> None:
    """Both in one go; a decimal comma takes the semicolon by itself; nothing temporary is left."""
    csv, parquet = tmp_path / "x.csv", tmp_path / "x.parquet"
    form = ["--decimal", ",", "--zone", "Europe/Berlin"]
    assert run(["last", "--runs", str(folder.path.parent), "--csv", str(csv), *form, "--parquet", str(parquet)]) == 0
    read = pd.read_csv(csv, sep=";", decimal=",")
    assert len(read) == pq.read_metadata(parquet).num_rows > 6000
    assert parquet.read_bytes() == (folder.path / "samples.parquet").read_bytes()
    assert read["t"].iloc[0].endswith("+01:00")
    assert {p.name for p in tmp_path.iterdir()} == {"runs", "x.csv", "x.parquet"}


def test_a_parquet_that_is_not_as_closed_is_made_anew(tmp_path: Path, folder: RunFolder,
                                                      capsys: pytest.CaptureFixture[str]) -> None:
    """A changed or missing export is not believed: the block file is the original."""
    wanted = pq.read_table(folder.path / "samples.parquet")
    for damage in (lambda p: p.write_bytes(p.read_bytes()[:-1] + b"x"), Path.unlink):
        damage(folder.path / "samples.parquet")
        assert run(["0007", "--runs", str(folder.path.parent), "--parquet", str(tmp_path / "x"), "--force"]) == 0
        assert pq.read_table(tmp_path / "x").equals(wanted)
        assert "made anew from the block file" in capsys.readouterr().err


def test_standard_output_takes_the_csv(folder: RunFolder, capfdbinary: pytest.CaptureFixture[bytes]) -> None:
    """For a pipe; only the columns asked for."""
    assert run(["0007", "--runs", str(folder.path.parent), "--csv", "-", "--columns", "t,voltage_kV"]) == 0
    read = pd.read_csv(io.BytesIO(capfdbinary.readouterr().out))
    assert list(read.columns) == ["t", "voltage_kV"]


@pytest.mark.parametrize(("words", "said"), [
    (["--csv", "RUN/x.csv"], "outside the run's folder"), (["--csv", "HERE/there.csv"], "a new file"),
    ([], "--csv FILE"), (["--parquet", "-"], "a file's name")])
def test_nothing_is_written_into_a_run_or_over_a_file(tmp_path: Path, folder: RunFolder, words: list[str],
                                                      said: str) -> None:
    """A closed run stays closed; a file that is there stays unless told."""
    (tmp_path / "there.csv").write_text("mine")
    filled = [word.replace("RUN", str(folder.path)).replace("HERE", str(tmp_path)) for word in words]
    with pytest.raises(UsageFault, match=said):
        run(["0007", "--runs", str(folder.path.parent), *filled])
    assert (tmp_path / "there.csv").read_text() == "mine"


def test_a_place_that_cannot_be_written_is_a_sentence_and_leaves_nothing(
        tmp_path: Path, folder: RunFolder, capsys: pytest.CaptureFixture[str]) -> None:
    """No traceback, no half file, exit code 7; a wrong form is refused with 5 before anything is opened."""
    runs = str(folder.path.parent)
    with pytest.raises(RecordFault, match="expected a file that can be written"):
        run(["0007", "--runs", runs, "--csv", str(tmp_path / "absent" / "x.csv")])
    assert main(["export", "0007", "--runs", runs, "--csv", str(tmp_path / "y.csv"), "--zone", "Mars"]) == 5
    assert "a time zone" in capsys.readouterr().err
    assert main(["export", "0007", "--runs", runs, "--csv", str(tmp_path / "y.csv"), "--separator", "."]) == 5
    assert {p.name for p in tmp_path.iterdir()} == {"runs"}


QUERY = """
SELECT regexp_extract(filename, '([^/]+)/samples.parquet$', 1) AS run,
       round(max(abs(voltage_kV))::DOUBLE, 2)                                AS highest_kV,
       round(quantile_cont(abs(current_mA)::DOUBLE, 0.99) * 1000, 2)         AS current_p99_uA,
       count(*)                                                              AS samples
FROM read_parquet('FOLDER/*/samples.parquet', filename = true)
WHERE state = 'energised'
GROUP BY run HAVING highest_kV > 1 ORDER BY highest_kV DESC
"""


def test_one_query_runs_over_every_run_s_parquet(tmp_path: Path) -> None:
    """The README's query, by an engine that did not write the files: highest voltage and current of each run."""
    for number, level in ((1, 2000.0), (2, 8000.0), (3, 500.0)):
        export(made_run(tmp_path, Case(hold_s=0.2, level_v=level, meta={"run": f"000{number}"})))
    rows = duckdb.sql(QUERY.replace("FOLDER", str(tmp_path))).fetchall()
    assert [name.rpartition("-")[2] for name, *_ in rows] == ["0002", "0001"]
    assert rows[0][1] == pytest.approx(8.0, abs=0.05)
