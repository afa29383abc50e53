"""The runner of the checks: beside other faults of the file, and with a day given."""

from datetime import date

from hvhost.bench.checks import CHECKS, date_findings
from tests.bench.changes import NOTE, REASON, findings


def test_a_fault_ends_only_the_checks_that_need_its_value() -> None:
    """One typing error does not hide the missing interlock."""
    told = findings("supply.voltage=25 KV", "interlock.hard_wired=no", "ground.energy=1 mJ", "bleed.times=5")
    assert [f.what for f in told] == ["supply.voltage", "interlock.hard_wired", "ground.energy", "bleed.times"]
    told = findings("ceilings.voltage=24", "interlock.hard_wired=no", "limits.overcurrent_level=6 mA")
    assert [f.what for f in told] == ["ceilings.voltage", "limits.overcurrent_level"], "is 24 dangerous?"


def test_days_around_the_last_day() -> None:
    """No calibration gives no finding about days; the day itself is still valid."""
    assert date_findings(None, date(2027, 1, 1), "f", 3) == ()
    assert date_findings(date(2027, 6, 1), date(2027, 5, 1), "f", 3) == ()
    assert [f.grade for f in date_findings(date(2027, 6, 1), date(2027, 5, 2), "f", 3)] == [NOTE]
    assert [f.grade for f in date_findings(date(2027, 6, 1), date(2027, 6, 1), "f", 3)] == [NOTE]
    assert [(f.grade, f.line) for f in date_findings(date(2027, 6, 1), date(2027, 6, 2), "f", 3)] == [(REASON, 3)]


def test_every_check_has_a_sentence() -> None:
    """Each check says in its first line what it holds."""
    for check in CHECKS:
        assert (check.__doc__ or "").strip().endswith(".")
