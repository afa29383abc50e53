"""B7 in a tiny form."""

from hvhost.speed import guarding
from hvhost.speed.setting import Setting
from tests.speed.shape import check


def test_the_guard_is_timed_on_ramp_and_hold(setting: Setting) -> None:
    """The dearer of the two is the figure."""
    (line,) = guarding.measure(setting)
    check([line], "B7")
    assert line.measured == max(part["ratio"] for part in line.raw.values())
    assert set(line.raw) == {"ramp", "hold"}
