"""B1 in a tiny form."""

from hvhost.speed import path
from hvhost.speed.setting import Setting
from tests.speed.shape import check


def test_processor_and_throughput_are_told_beside_what_they_are_compared_with(setting: Setting) -> None:
    """Both lines, positive, with the figures of ramp and hold and of every block behind them."""
    lines = path.measure(setting)
    check(lines, "B1")
    assert [line.worst for line in lines] == ["most", "least"]
    assert all(line.measured > 0.0 for line in lines)
    assert {name: len(part["ours_us_per_pair"]) for name, part in lines[0].raw.items()} == {"ramp": 2, "hold": 2}
    assert len(lines[1].raw["raw_mb_per_s"]) == 2
