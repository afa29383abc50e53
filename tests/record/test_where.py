"""The filter language over the catalogue: closed, strict, and never code."""

from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.record.catalogue import RunSummary
from hvhost.record.where import COLUMNS, LONGEST, where
from hvhost.words.errors import CommandRefused, HvhostError
from tests.record.making import OPENED_NS


def run(**changes: object) -> RunSummary:
    """A run of the catalogue."""
    values: dict[str, object] = {
        "path": Path("runs/x"), "run": "270115n1", "kind": "plan", "opened_utc_ns": OPENED_NS, "specimen": "BU-0107",
        "order": "2027-0031", "operator": "operator A", "plan": "withstand of a bushing", "bench": "demo",
        "outcome": "finished", "verdict": "pass", "highest_v": 12_345.0, "breakdown_v": None, "time_on_s": 75.5,
        "tag": 1, "revisions": 0, "delivery": "", **changes}
    return RunSummary(**values)  # type: ignore[arg-type]


@pytest.mark.parametrize(("expression", "fits"), [
    ("verdict = pass", True), ("verdict != pass", False), ("verdict = 'not decided'", False),
    ("outcome = finished and highest > 12 kV", True), ("highest > 12.345 kV", False), ("highest >= 12.345 kV", True),
    ("highest < 12345.1 V", True), ("time_on >= 75 s", True), ("time_on > 1.5min", False),
    ("verdict = fail or kind = plan", True), ("verdict = fail and kind = plan or kind = plan", True),
    ("verdict = fail and (kind = plan or kind = plan)", False), ("not verdict = fail", True),
    ("not (verdict = pass and not outcome = tripped)", False), ("specimen ~ bu-", True), ("plan ~ BUSHING", True),
    ("plan = withstand of a bushing", True), ('specimen ~ "="', False), ("breakdown = none", True),
    ("breakdown != none", False), ("breakdown > 0 V", False), ("not breakdown > 0 V", True), ("delivery = none", True),
    ("opened >= 2027-01-15", True), ("opened < 2027-01-15", False), ("opened >= 2027-01-15T09:00+01:00", True),
    ("opened > 2027-01-15T08:00:00Z", False), ("revisions = 0", True), ("order = 2027-0031", True),
    ("specimen = BU-0107 and order = 2027-0031 and operator = 'operator A' and bench = demo and run = 270115n1", True)])
def test_an_expression_fits_a_run_or_not(expression: str, fits: bool) -> None:
    """Comparisons, brackets, 'and' before 'or', quantities with their units, dates, and 'none' for what is not told."""
    assert where(expression)(run()) is fits


@pytest.mark.parametrize(("expression", "said"), [
    ("", "a column"), ("verdict", "an operator"), ("verdict =", "a value"), ("verdict = pass and", "a column"),
    ("verdict = (pass)", "a value"), ("(verdict = pass", "'\\)'"), ("verdict = pass)", "'and', 'or' or the end"),
    ("verdct = pass", "did you mean 'verdict'"), ("highest > 12", "a voltage such as"),
    ("highest > 12,5 kV", "a voltage"),
    ("highest ~ 12", "a column of text"), ("verdict == pass", "a value"), ("breakdown > none", "= or != before none"),
    ("opened > yesterday", "a date such as"), ("opened > 2027-02-30", "a date such as"),
    ("revisions = 1.5", "number"),
    ("verdict = pass; drop", "pass; drop"), ("__class__ = x", "a column"), ("path = /", "a column"),
    ("verdict = 'pass", "a column, a value"), ("not " * 30 + "verdict = pass", "at most 20"),
    ("(" * 30 + "verdict = pass" + ")" * 30, "at most 20"), ("verdict = pass\n", "printable"),
    ("verdict = " + "x" * LONGEST, f"at most {LONGEST}")])
def test_what_is_no_expression_is_refused_with_its_place(expression: str, said: str) -> None:
    """Each fault says what was expected and where; nothing is guessed and nothing is run."""
    if said == "pass; drop":
        assert where(expression)(run(verdict="pass; drop"))  # a value is text and nothing else
        return
    with pytest.raises(CommandRefused, match=said):
        where(expression)


PIECES = [*COLUMNS, "=", "!=", "<", "~", "(", ")", "and", "or", "not", "'x'", "none", "12 kV", "2027-01-15"]


@given(st.text(max_size=80) | st.lists(st.sampled_from(PIECES), max_size=12).map(" ".join))
def test_no_text_does_more_than_fit_or_be_refused(text: str) -> None:
    """Any text gives a test that answers yes or no, or a sentence."""
    try:
        fits = where(text)
    except HvhostError:
        return
    assert fits(run()) in (True, False)
    assert fits(run(highest_v=None, specimen="")) in (True, False)


def test_every_column_is_one_of_the_catalogue() -> None:
    """The language knows no field that a run does not have."""
    assert {column.field for column in COLUMNS.values()} <= set(RunSummary.__slots__)
