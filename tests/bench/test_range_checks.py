"""Numbers against each other, each on both sides of its bound."""

import pytest

from hvhost.words.findings import Grade
from tests.bench.changes import NOTE, REFUSE, Side, assert_both_sides, name_of

SIDES: list[Side] = [
    (("ceilings.voltage=24.7 kV",), ("ceilings.voltage=24.7 kV", "supply.voltage=24.6 kV"), REFUSE, "ceilings.voltage"),
    (("ceilings.current=4 mA",), ("ceilings.current=4.01 mA",), REFUSE, "ceilings.current"),
    (("lower.longest=4.8 s",), ("lower.longest=4.7 s",), NOTE, "lower.longest"),
    (("lease.time=100 ms",), ("lease.time=150 ms", "lease.shortest=160 ms"), REFUSE, "lease.time"),
    (("lease.shortest=500 ms", "lease.longest=500 ms"), ("lease.shortest=500 ms", "lease.longest=400 ms"), REFUSE,
     "lease.shortest"),
    (("voltage.program.converter=9.6 V",), ("voltage.program.converter=9.5 V",), REFUSE, "voltage.program.converter"),
    (("current.program.converter=10 V",), ("current.program.converter=9.9 V",), REFUSE, "current.program.converter"),
    (("limits.overvoltage=24.999 kV",), ("limits.overvoltage=25 kV",), REFUSE, "limits.overvoltage"),
    (("limits.overvoltage=24.1 kV",), ("limits.overvoltage=24 kV",), REFUSE, "limits.overvoltage"),
    (("limits.overcurrent=9.99 mA",), ("limits.overcurrent=10 mA",), REFUSE, "limits.overcurrent"),
    (("limits.overcurrent_level=5 mA",), ("limits.overcurrent_level=5.1 mA",), REFUSE, "limits.overcurrent_level"),
    (("limits.collapse=11 V",), ("limits.collapse=10 V",), REFUSE, "limits.collapse"),
    (("limits.collapse=23 kV",), ("limits.collapse=24 kV",), REFUSE, "limits.collapse"),
    (("supply.programming_delay=63 ms",), ("supply.programming_delay=64 ms",), REFUSE, "supply.programming_delay"),
    (("limits.missing_after=3 ms",), ("limits.missing_after=2.9 ms",), REFUSE, "limits.missing_after"),
    (("bleed.zero_band=10 V",), ("bleed.zero_band=9 V",), REFUSE, "bleed.zero_band"),
    (("bleed.zero_band=1.2 kV",), ("bleed.zero_band=1.3 kV",), REFUSE, "bleed.zero_band"),
]


@pytest.mark.parametrize(("fine", "faulty", "grade", "key"), SIDES, ids=name_of)
def test_both_sides(fine: tuple[str, ...], faulty: tuple[str, ...], grade: Grade, key: str) -> None:
    """Each check speaks on one side of its bound and is silent on the other."""
    assert_both_sides(fine, faulty, grade, key)
