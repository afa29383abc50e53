"""The table for people."""

from hvhost.speed.figures import Line
from hvhost.speed.table import table


def test_each_line_says_measured_bound_aim_and_whether_it_holds() -> None:
    """And what it was compared with; the last line counts what does not hold."""
    good = Line(budget="B1", what="path", measured=0.4, bound=0.5, aim=0.2, unit="x", against="the script", note="n")
    bad = Line(budget="B8", what="append", measured=0.3, bound=0.4, unit="x", worst="least", against="a write")
    shown = Line(budget="B5", what="processor", measured=0.02, bound=0.25, unit="core", against="-", judged=False)
    lines = table([good, bad, shown], machine="a machine").splitlines()
    assert lines[0] == "a machine"
    assert lines[2].split() == ["B1", "path", "0.4", "x", "≤", "0.5", "x", "0.2", "x", "within"]
    assert lines[3] == "     against the script; n"
    assert lines[4].endswith("NOT WITHIN")
    assert lines[-1] == "1 of 2 bounds not held: B8"
    assert table([good]).splitlines()[-1] == "every bound holds"
