"""The form of a CSV: what could not be read again is refused before anything is written."""

from datetime import UTC, timedelta
from zoneinfo import ZoneInfo

import pytest

from hvhost.record.csvform import CsvForm, offset_text, time_text, zone_of
from hvhost.words.errors import CommandRefused


@pytest.mark.parametrize(("changes", "said"), [
    ({"decimal": ","}, "not the decimal mark"), ({"decimal": ";"}, "decimal mark"), ({"separator": "x"}, "separator"),
    ({"separator": "."}, "separator"), ({"zone": "Europe/Nowhere"}, "a time zone"), ({"zone": "../etc/passwd"}, "zone"),
    ({"zone": "/etc/localtime"}, "zone"), ({"zone": ""}, "zone"), ({"zone": "Europe"}, "zone")])
def test_a_form_that_could_not_be_read_again_is_refused(changes: dict[str, str], said: str) -> None:
    """Marks that clash, marks nobody reads, zones that are none or would be paths."""
    with pytest.raises(CommandRefused, match=said):
        CsvForm(**changes)


def test_times_carry_the_offset_of_their_zone() -> None:
    """Summer and winter differ; west is negative; half hours exist."""
    assert zone_of("UTC") is UTC
    berlin = ZoneInfo("Europe/Berlin")
    assert time_text(1_800_000_000_000_000_000, berlin) == "2027-01-15T09:00:00+01:00"
    assert time_text(1_785_000_000_999_999_999, berlin) == "2026-07-25T19:20:00+02:00"
    assert [offset_text(timedelta(minutes=m)) for m in (0, 330, -210)] == ["+00:00", "+05:30", "-03:30"]
