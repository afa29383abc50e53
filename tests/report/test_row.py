"""The row of a closed run: columns that stay, units in names, nothing that a spreadsheet would run."""

import csv
import io
from pathlib import Path
from typing import Any

import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.measure.result import evaluate
from hvhost.record.csvform import CsvForm
from hvhost.record.data import load_run
from hvhost.report.resultfile import result_document
from hvhost.report.row import COLUMNS, file_name, results_csv
from tests.record.making import Case, made_run

GERMAN = CsvForm(decimal=",", separator=";", zone="Europe/Berlin")


@pytest.fixture(scope="module")
def document(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Any]:
    """The result of a run with a breakdown on a negative bench."""
    run = load_run(made_run(tmp_path_factory.mktemp("runs"), Case(break_at_s=3.0)))
    return result_document(run.meta, evaluate(run))


@pytest.mark.parametrize("form", [GERMAN, CsvForm()], ids=["German", "English"])
def test_pandas_reads_the_row_back(document: dict[str, Any], form: CsvForm) -> None:
    """Numbers with the output's sign, in the units of their names, U with k = 2."""
    data = results_csv(document, form)
    row = pd.read_csv(io.BytesIO(data), sep=form.separator, decimal=form.decimal, dtype={"run": str}).iloc[0]
    assert list(row.index) == list(COLUMNS)
    assert (row["run"], row["specimen"], row["verdict"], row["outcome"]) == ("0007", "S-1", "fail", "tripped")
    assert row["highest_kV"] == pytest.approx(-document["highest_v"] / 1e3)
    assert row["breakdown_kV"] == pytest.approx(-document["breakdowns"][0]["volts"]["value"] / 1e3, rel=1e-8)
    assert row["breakdown_U_kV"] == pytest.approx(2e-3 * document["breakdowns"][0]["volts"]["u"], rel=1e-8)
    assert row["hold_s"] == pytest.approx(document["holds"][-1]["inside_s"])
    assert (row["breakdowns"], row["samples"]) == (1, document["pairs"])
    assert pd.Timestamp(row["opened"]) == pd.Timestamp("2027-01-15T08:00:00Z")
    assert row["opened"].endswith("+01:00" if form is GERMAN else "+00:00")


def test_what_is_not_known_is_an_empty_cell() -> None:
    """A result with hardly anything gives a row with every column all the same."""
    (header, row) = list(csv.reader(io.StringIO(results_csv({"run": "1", "opened_utc_ns": 0}, CsvForm()).decode())))
    assert header == list(COLUMNS)
    assert dict(zip(header, row, strict=True))["hold_kV"] == ""


@pytest.mark.parametrize("text", ["=1+1", "+49", "-x", "@SUM(A1)"])
def test_a_text_that_a_spreadsheet_would_run_is_marked_as_text(text: str) -> None:
    """What somebody typed as an order stays a text; numbers of ours keep their minus."""
    document = {"order": text, "highest_v": 5e3, "polarity": -1}
    row = next(csv.DictReader(io.StringIO(results_csv(document, CsvForm()).decode())))
    assert row["order"] == "'" + text
    assert row["highest_kV"] == "-5"


@given(st.text(max_size=100), st.text(max_size=100))
def test_a_file_s_name_is_a_name_whatever_was_typed(order: str, specimen: str) -> None:
    """No slash, no blank, no dot in front, and never longer than a file system takes."""
    name = file_name({"order": order, "specimen": specimen}, "20270115T080000Z-0007")
    assert Path(name).name == name
    assert not name.startswith(".")
    assert len(name.encode()) < 200
    assert name.isascii()
    assert name.endswith("_20270115T080000Z-0007.csv")


def test_order_and_specimen_lead_the_name() -> None:
    """Whoever looks into the folder finds the order at once."""
    document = {"order": "2027/0031", "specimen": "BU-0107 #2"}
    assert file_name(document, "x-1") == "2027-0031_BU-0107-2_x-1.csv"
    assert file_name({}, "x-1") == "no-order_no-specimen_x-1.csv"
