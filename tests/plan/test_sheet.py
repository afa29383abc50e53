"""Run sheets from files and from what was typed."""

from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.plan.sheet import check_sheet, load_sheet, read_sheet, sheet_from, sheet_of, sheet_schema
from hvhost.words.errors import FileFault
from hvhost.words.findings import Grade
from tests.plan.conftest import CONFIGS, FAULTY
from tests.plan.test_language import unmatched, wanted

FAULTY_SHEETS = sorted((FAULTY / "sheet").glob("*.yaml"))


@pytest.mark.parametrize("path", FAULTY_SHEETS, ids=lambda path: path.stem)
def test_every_fault_is_found_in_one_go(path: Path) -> None:
    """Each faulty sheet gives exactly the findings that its lines announce."""
    findings = check_sheet(path)
    assert wanted(path)
    assert unmatched(wanted(path), findings) == ([], [])
    with pytest.raises(FileFault):
        load_sheet(path)


@pytest.mark.parametrize("name", ["withstand", "leakage", "stepvoltage", "breakdown", "demo"])
def test_examples_check_in_silence(name: str) -> None:
    """Nothing is said of the example sheets."""
    assert check_sheet(CONFIGS / f"{name}.sheet.yaml") == ()


def test_a_sheet_says_what_was_entered() -> None:
    """Specimen, people, environment, values and windows come through in SI units."""
    sheet = load_sheet(CONFIGS / "withstand.sheet.yaml")
    assert (sheet.specimen, sheet.order, sheet.second_person) == ("BU-0107", "2026-0031", "second operator")
    assert sheet.environment.humidity == pytest.approx(0.41)
    assert sheet.environment.pressure_pa == pytest.approx(100.8e3)
    assert sheet.values == {"test_voltage": "12 kV"}
    assert sheet.capacitance is not None
    assert (sheet.capacitance.low, sheet.capacitance.high) == (1e-10, 1e-9)
    assert sheet.confirmed.polarity == 1
    assert sheet.lines["values.test_voltage"] == 12


def test_a_typed_sheet_is_a_text_like_any_other() -> None:
    """What was typed is written out, and reading that text gives the same sheet and hash."""
    typed = sheet_of("BU: 7", operator="o'neil \"x\" # 1", values={"u": "5 kV"}, order="A-1", repeat_of="label torn")
    again = sheet_from(typed.file, typed.text)
    assert again == typed
    assert (again.specimen, again.operator, again.values) == ("BU: 7", "o'neil \"x\" # 1", {"u": "5 kV"})


@pytest.mark.parametrize("specimen", ["", " ", "a\nb", "x" * 65, "\x1b[2J", "ä", "-x"])
def test_a_typed_label_that_could_not_stand_in_a_file_is_refused(specimen: str) -> None:
    """An ID of letters, digits and a few signs; nothing that could upset a screen or a folder's name."""
    with pytest.raises(FileFault, match="specimen"):
        sheet_of(specimen)


def test_the_schema_asks_for_a_specimen() -> None:
    """The JSON Schema is that of a run sheet."""
    assert "specimen" in sheet_schema()["required"]


LINES = st.lists(st.one_of(st.sampled_from([
    "sheet: x", "specimen: S-1", "specimen:", "connected:", "  capacitance: {from: 1 nF, to: 2 nF}", "  current: 5",
    "  current: {from: 1 A}", "connected: []", "values:", "  u: 5 kV", "  ? [a]", "confirmed: {polarity: x}",
    "operator: o", "second_person: o", "environment: {humidity: 41 %}", "specimen_data: {a: b, 3: c}",
    "remarks: |", "  any text",
]), st.text(max_size=12)), max_size=10)


@given(LINES)
def test_no_file_raises(lines: list[str]) -> None:
    """Any mixture of lines gives a sheet or findings that refuse, never anything else."""
    sheet, findings = read_sheet("s.yaml", "\n".join(lines))
    assert (sheet is None) == any(finding.grade is Grade.REFUSE for finding in findings)


@given(st.text(max_size=80), st.text(max_size=80),
       st.dictionaries(st.text(max_size=9), st.text(max_size=9), max_size=3))
def test_whatever_is_typed_is_kept_or_refused(specimen: str, operator: str, values: dict[str, str]) -> None:
    """A typed sheet says exactly what was typed (spaces at its ends aside), or is refused; nothing in between."""
    try:
        sheet = sheet_of(specimen, operator=operator, values=values)
    except FileFault:
        return
    assert (sheet.specimen, sheet.operator, sheet.values) == (specimen, operator.strip(), values)
