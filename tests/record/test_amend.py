"""Corrections of a run sheet and kinds of breakdowns: chained revisions over a closed list of fields."""

import fcntl
import os
from pathlib import Path

import pytest

from hvhost.record.amend import (
    FIELDS,
    SPELLINGS,
    BreakdownKind,
    alone,
    amend,
    amended_keys,
    amended_meta,
    amended_sheet,
    inspect_breakdown,
    kinds_of,
    revision_text,
)
from hvhost.record.catalogue import list_runs
from hvhost.record.folder import RunFolder
from hvhost.record.manifest import append_revision, check_folder, revisions_of, write_manifest
from hvhost.words.errors import CommandRefused
from tests.record.making import OPENED_NS, made_meta

SHEET = {"specimen": "S-1", "order": "", "second_person": "", "environment": {"temperature_c": 22.0, "humidity": 0.4}}


def closed(root: Path) -> RunFolder:
    """A closed folder with a sheet."""
    folder = RunFolder.create(root, "0001", OPENED_NS, made_meta(run="0001", sheet=SHEET).to_json(), {})
    write_manifest(folder)
    return folder


def test_corrections_are_revisions_in_order_and_nothing_closed_changes(tmp_path: Path) -> None:
    """Each says from what to what, why and by whom; the folder stays sound and the catalogue shows the last word."""
    folder = closed(tmp_path)
    before = {p.name: p.read_bytes() for p in folder.path.iterdir()}
    amend(folder, {"specimen": "S-2", "order": "2027-0031"}, reason="label misread", by="operator A", utc_ns=1)
    amend(folder, {"specimen": "S-3"}, reason="misread again", by="operator B", utc_ns=2)
    revisions = revisions_of(folder)
    assert [r["data"]["fields"].get("specimen") for r in revisions] == [
        {"from": "S-1", "to": "S-2"}, {"from": "S-2", "to": "S-3"}]
    assert {p.name: p.read_bytes() for p in folder.path.iterdir() if p.is_file()} == before
    assert check_folder(folder).sound
    (summary,) = list_runs(tmp_path)
    assert (summary.specimen, summary.order, summary.revisions) == ("S-3", "2027-0031", 2)
    assert amended_keys(revisions) == {"specimen": 2, "order": 1}
    assert revision_text(revisions[1]) == "specimen: 'S-2' corrected to 'S-3' (operator B: misread again)"


def test_a_correction_back_and_forth_is_three_revisions(tmp_path: Path) -> None:
    """The same words twice are two acts, not one."""
    folder = closed(tmp_path)
    for value in ("S-2", "S-1", "S-2"):
        amend(folder, {"specimen": value}, reason="as found", by="operator A", utc_ns=1)
    assert len(revisions_of(folder)) == 3
    assert amended_sheet(SHEET, revisions_of(folder))["specimen"] == "S-2"


def test_values_are_read_as_a_run_sheet_reads_them(tmp_path: Path) -> None:
    """Quantities carry their unit, and meta shows them in the record's own units."""
    folder = closed(tmp_path)
    amend(folder, {"environment.temperature": "25 °C", "environment.humidity": "55 %", "operator": "operator C"},
          reason="thermometer read late", by="operator A", utc_ns=1)
    meta = amended_meta(made_meta(sheet=SHEET), revisions_of(folder))
    assert meta.sheet is not None
    assert meta.sheet["environment"] == {"temperature_c": 25.0, "humidity": 0.55}
    assert meta.operator == "operator C"
    assert amended_meta(made_meta(sheet=SHEET), ()) == made_meta(sheet=SHEET)


@pytest.mark.parametrize(("changes", "reason", "by", "found"), [
    ({"specimen": "=1+1"}, "x", "a", "a specimen ID"),
    ({"environment.temperature": "25"}, "x", "a", "temperature"),
    ({"environment.pressure": "1,5 kPa"}, "x", "a", "pressure"),
    ({"values.test_voltage": "1 kV"}, "x", "a", "one of specimen"),
    ({"specimn": "S-2"}, "x", "a", "did you mean 'specimen'"),
    ({"specimen": "S-1"}, "x", "a", "a value that differs"),
    ({"order": ""}, "x", "a", "order"),
    ({"specimen": "S-2"}, " ", "a", "a reason"),
    ({"specimen": "S-2"}, "x", "", "a name"),
    ({"specimen": "S-2"}, "x\ny", "a", "a reason"),
    ({}, "x", "a", "at least one field")])
def test_what_cannot_be_corrected_is_refused_whole(tmp_path: Path, changes: dict[str, str], reason: str, by: str,
                                                   found: str) -> None:
    """Unknown fields, values that no sheet could hold, no reason, no name, no change: nothing is written."""
    folder = closed(tmp_path)
    with pytest.raises(CommandRefused, match=found):
        amend(folder, {**changes, **({"order": "7"} if changes else {}), **changes}, reason=reason, by=by, utc_ns=1)
    assert revisions_of(folder) == ()


def test_what_a_verdict_was_judged_by_is_in_no_field() -> None:
    """Values of the plan's parameters and the windows that prove the specimen can only be run again."""
    assert set(SPELLINGS.values()) == set(FIELDS)
    assert not any(key.startswith(("values", "connected", "confirmed")) for key in (*SPELLINGS, *FIELDS))


def test_a_breakdown_gets_its_kind_from_whoever_looked(tmp_path: Path) -> None:
    """The last look counts; the kinds are three words and no other."""
    folder = closed(tmp_path)
    inspect_breakdown(folder, 1, 7321, "flashover", by="operator A", utc_ns=1)
    inspect_breakdown(folder, 1, 7321, "puncture", by="operator B", remark="hole found under the sheath", utc_ns=2)
    kinds = kinds_of(revisions_of(folder))
    assert (kinds[7321].kind, kinds[7321].by, kinds[7321].revision) == ("puncture", "operator B", 2)
    assert revision_text(revisions_of(folder)[1]) == (
        "breakdown 1: puncture, seen by operator B: hole found under the sheath")
    with pytest.raises(CommandRefused, match="did you mean 'sparkover'"):
        inspect_breakdown(folder, 1, 7321, "spark-over", by="operator A", utc_ns=3)
    with pytest.raises(CommandRefused, match="puncture already, by operator B"):
        inspect_breakdown(folder, 1, 7321, "puncture", by="operator A", utc_ns=3)
    assert [str(kind) for kind in BreakdownKind] == ["puncture", "flashover", "sparkover"]


def test_an_open_run_and_one_that_somebody_amends_are_left_alone(tmp_path: Path) -> None:
    """A run must be closed first; of two at once one is told to try again."""
    opened = RunFolder.create(tmp_path, "0002", OPENED_NS, made_meta(run="0002", sheet=SHEET).to_json(), {})
    with pytest.raises(CommandRefused, match="a closed run"):
        amend(opened, {"specimen": "S-2"}, reason="x", by="a", utc_ns=1)
    folder = closed(tmp_path)
    other = os.open(folder.path, os.O_RDONLY)
    fcntl.flock(other, fcntl.LOCK_EX)
    with pytest.raises(CommandRefused, match="nobody else amends"):
        amend(folder, {"specimen": "S-2"}, reason="x", by="a", utc_ns=1)
    os.close(other)
    with alone(folder):
        pass


def test_revisions_of_another_hand_or_form_are_passed_over(tmp_path: Path) -> None:
    """A reader applies what it understands and breaks on nothing."""
    folder = closed(tmp_path)
    for data in ({"fields": {"values": {"to": 1}}}, {"fields": "x"}, {"fields": {"specimen": 3}}, {"index": "x"}):
        append_revision(folder, "amendment", data, utc_ns=1)
        append_revision(folder, "inspection", data, utc_ns=1)
    revisions = revisions_of(folder)
    assert amended_sheet(SHEET, revisions) == SHEET
    assert kinds_of(revisions) == {}
    assert [revision_text(r) for r in ({"kind": "recovered", "data": {}}, {"kind": "amendment", "data": 3})] == ["", ""]
    assert all(isinstance(revision_text(r), str) for r in revisions)
