"""The seam to the outlets: bounded, counting, never waiting (S12)."""

from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.publish.outlet import Publisher, SnapshotQueue
from hvhost.publish.snapshot import OutletView, Snapshot
from tests.pictures.states import IDLE


def numbered(seq: int) -> Snapshot:
    """Return a snapshot with this number."""
    return replace(IDLE, seq=seq)


class StalledOutlet:
    """An outlet whose far end takes nothing: its queue is never emptied."""

    name = "stalled"

    def __init__(self) -> None:
        self.queue = SnapshotQueue(4)

    def offer_nowait(self, snapshot: Snapshot) -> None:
        """Queue it; nobody takes it."""
        self.queue.offer_nowait(snapshot)

    def view(self) -> OutletView:
        """Return the losses."""
        return OutletView(name=self.name, dropped=self.queue.statistics().dropped)


class BrokenOutlet:
    """An outlet with a fault of ours in it."""

    name = "broken"

    def offer_nowait(self, snapshot: Snapshot) -> None:
        """Raise, always."""
        raise RuntimeError("a fault of ours")

    def view(self) -> OutletView:
        """Raise, too."""
        raise RuntimeError("and here")


class TakingOutlet(StalledOutlet):
    """An outlet that takes at once."""

    name = "taking"

    def offer_nowait(self, snapshot: Snapshot) -> None:
        """Queue and take."""
        super().offer_nowait(snapshot)
        assert self.queue.take_nowait() is not None


def test_a_stalled_outlet_loses_its_oldest_and_says_so() -> None:
    """S12: a thousand snapshots past a stalled outlet keep four, count the rest, and the others get all."""
    stalled, taking = StalledOutlet(), TakingOutlet()
    publisher = Publisher((stalled, BrokenOutlet(), taking))
    for seq in range(1000):
        publisher.publish_nowait(numbered(seq))
    views = {one.name: one for one in publisher.views()}
    assert views["stalled"].dropped == 996
    assert views["taking"].dropped == 0
    assert taking.queue.statistics().taken == 1000
    kept = stalled.queue.take_nowait()
    assert kept is not None
    assert kept.seq == 996


def test_a_broken_outlet_is_counted_and_harms_nobody() -> None:
    """An outlet that raises neither ends the daemon nor keeps the next outlet from its snapshot."""
    taking = TakingOutlet()
    publisher = Publisher((BrokenOutlet(),))
    publisher.add(taking)
    publisher.publish_nowait(IDLE)
    assert {one.name: one.failed for one in publisher.views()} == {"broken": 2, "taking": 0}
    assert taking.queue.statistics().taken == 1


def test_newest_is_taken_and_the_older_ones_are_counted() -> None:
    """An outlet that shows the present skips what it was too slow for, counted as dropped."""
    queue = SnapshotQueue(8)
    for seq in range(5):
        queue.offer_nowait(numbered(seq))
    newest = queue.take_newest_nowait()
    assert newest is not None
    assert newest.seq == 4
    assert queue.statistics().dropped == 4
    assert queue.take_newest_nowait() is None
    assert queue.take_nowait() is None


def test_each_offer_wakes() -> None:
    """The outlet's own task is woken by an offer."""
    woken: list[int] = []
    queue = SnapshotQueue(1, wake=lambda: woken.append(1))
    queue.offer_nowait(IDLE)
    queue.offer_nowait(IDLE)
    assert len(woken) == 2


def test_an_empty_queue_is_no_queue() -> None:
    """A bound of nothing is a mistake of the caller."""
    with pytest.raises(ValueError, match="at least one"):
        SnapshotQueue(0)


@given(st.integers(1, 5), st.lists(st.sampled_from(["offer", "take", "newest"]), max_size=60))
def test_nothing_is_lost_uncounted(limit: int, acts: list[str]) -> None:
    """Whatever the order of offers and takes: offered = taken + dropped + waiting, waiting within the bound."""
    queue = SnapshotQueue(limit)
    for act in acts:
        if act == "offer":
            queue.offer_nowait(IDLE)
        elif act == "take":
            queue.take_nowait()
        else:
            queue.take_newest_nowait()
        now = queue.statistics()
        assert now.offered == now.taken + now.dropped + now.waiting
        assert now.waiting <= limit
