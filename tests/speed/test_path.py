"""B1 in a tiny form."""

from hvhost.speed import path
from hvhost.speed.setting import Setting
from tests.speed.shape import check


def test_processor_and_throughput_are_told_beside_what_they_are_compared_with(setting: Setting) -> None:
    """In pieces, a block a read (shown only), and through a terminal; with the figures of every block behind them."""
    lines = path.measure(setting)
    check(lines, "B1")
    assert [(line.worst, line.judged) for line in lines] == [("most", True), ("most", False), ("least", True)]
    assert all(line.measured > 0.0 for line in lines)
    assert {name: len(part["ours_us_per_pair"]) for name, part in lines[0].raw.items()} == {"ramp": 2, "hold": 2}
    assert len(lines[2].raw["raw_mb_per_s"]) == 2
