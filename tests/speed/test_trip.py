"""B2 in a tiny form."""

import os

from hvhost.speed import trip
from hvhost.speed.setting import Setting
from tests.speed.shape import check


def test_trips_are_timed_beside_echoes(setting: Setting) -> None:
    """At ordinary priority always; in real time, with the p99, where the machine permits it.  It is left as it was."""
    cores, policy = os.sched_getaffinity(0), os.sched_getscheduler(0)
    lines = trip.measure(setting)
    check(lines, "B2")
    assert len(lines) in (1, 3)
    assert lines[0].raw["ours"]["median"] > 0.0
    assert lines[0].raw["per_block"] == 5
    assert (os.sched_getaffinity(0), os.sched_getscheduler(0)) == (cores, policy)


def test_the_offending_line_is_one_that_cuts(setting: Setting) -> None:
    """What is asked is answered with a cut for overcurrent, each time anew."""
    trips = trip._Trips(setting)
    sent = bytearray()

    def write(data: bytes) -> bytes:
        sent.extend(data)
        return b""

    trips.player.write = write
    for _ in range(3):
        sent.clear()
        trips.again()
        trips.player.station.feed(trips.line)
        assert sent.startswith(b"\ncut ")
    trips.close()
