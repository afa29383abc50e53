"""The seam between the daemon and whatever shows or forwards its snapshots.

An outlet is anything with a name and ``offer_nowait``.  It never waits: what it cannot deliver it drops, oldest
first, and counts (S12).  The daemon offers each snapshot to a :class:`Publisher`, which keeps one outlet's fault
from the others and from the daemon; the protective path and the recorder never touch any of this.
"""

from collections import deque
from collections.abc import Callable, Coroutine, Iterator
from dataclasses import dataclass
from typing import Any, Protocol

from hvhost.publish.snapshot import OutletView, Snapshot

QUEUE_LIMIT = 8  # snapshots: about a second at the usual rate; older ones are of no use to anyone


class Outlet(Protocol):
    """Renders or forwards snapshots; ``offer_nowait`` returns at once, whatever happens at the far end."""

    @property
    def name(self) -> str:
        """Short name by which drops are reported."""

    def offer_nowait(self, snapshot: Snapshot) -> None:
        """Take the snapshot or drop an older one; never wait, never call back into the daemon."""

    def view(self) -> OutletView:
        """Return what was dropped and failed so far."""


@dataclass(frozen=True, slots=True, kw_only=True)
class QueueStatistics:
    """How a bounded queue is: snapshots offered, taken, dropped and waiting."""

    offered: int
    taken: int
    dropped: int
    waiting: int


class SnapshotQueue:
    """A bounded queue that drops its oldest snapshot and counts it.

    ``wake`` is called after each offer (an outlet sets an event there); it must not wait.
    """

    def __init__(self, limit: int = QUEUE_LIMIT, wake: Callable[[], None] | None = None) -> None:
        if limit < 1:
            raise ValueError("a queue holds at least one snapshot")
        self._waiting: deque[Snapshot] = deque()
        self._limit, self._wake = limit, wake
        self._offered = self._taken = self._dropped = 0

    def offer_nowait(self, snapshot: Snapshot) -> None:
        """Append the snapshot; where the queue is full the oldest goes and is counted."""
        self._offered += 1
        if len(self._waiting) >= self._limit:
            self._waiting.popleft()
            self._dropped += 1
        self._waiting.append(snapshot)
        if self._wake is not None:
            self._wake()

    def take_nowait(self) -> Snapshot | None:
        """Return the oldest waiting snapshot, None where there is none."""
        if not self._waiting:
            return None
        self._taken += 1
        return self._waiting.popleft()

    def take_newest_nowait(self) -> Snapshot | None:
        """Return the newest snapshot and count the older ones as dropped: for outlets that show only the present."""
        if not self._waiting:
            return None
        newest = self._waiting.pop()
        self._dropped += len(self._waiting)
        self._waiting.clear()
        self._taken += 1
        return newest

    def statistics(self) -> QueueStatistics:
        """Return the counts; offered = taken + dropped + waiting always holds."""
        return QueueStatistics(offered=self._offered, taken=self._taken, dropped=self._dropped,
                               waiting=len(self._waiting))


class Publisher:
    """Offers one snapshot to many outlets.

    An outlet that raises is a fault of ours in that outlet: it is counted and the others still get theirs.
    """

    def __init__(self, outlets: tuple[Outlet, ...] = ()) -> None:
        self._outlets = list(outlets)
        self._failed: dict[str, int] = {}

    def add(self, outlet: Outlet) -> None:
        """Add an outlet; it gets the next snapshot."""
        self._outlets.append(outlet)

    def publish_nowait(self, snapshot: Snapshot) -> None:
        """Offer the snapshot to every outlet, in order; never raises."""
        for _ in self.offers(snapshot):
            pass

    def offers(self, snapshot: Snapshot) -> Iterator[str]:
        """The same an outlet at a time: yields each one's name when it has been offered the snapshot."""
        for outlet in tuple(self._outlets):
            try:
                outlet.offer_nowait(snapshot)
            except Exception:
                self._failed[outlet.name] = self._failed.get(outlet.name, 0) + 1
            yield outlet.name

    def views(self) -> tuple[OutletView, ...]:
        """Return each outlet's losses, for the next snapshot."""
        return tuple(self._view(outlet) for outlet in self._outlets)

    def _view(self, outlet: Outlet) -> OutletView:
        failed = self._failed.get(outlet.name, 0)
        try:
            seen = outlet.view()
        except Exception:
            return OutletView(name=outlet.name, failed=failed + 1)
        return OutletView(name=seen.name, dropped=seen.dropped, failed=seen.failed + failed, clients=seen.clients)


class Host(Protocol):
    """What the daemon offers to an outlet that it attaches: requests, snapshots, a task of its own, a voice."""

    def ask(self, method: str, params: dict[str, Any], who: str) -> dict[str, Any]:
        """Carry out one request (see `publish.requests`); stops are on the wire when this returns.

        Raises `HvhostError` where it is refused; nothing was done then.
        """

    def add_outlet(self, outlet: Outlet) -> None:
        """Offer every snapshot to this outlet."""

    def add_service(self, name: str, service: Callable[[], Coroutine[Any, Any, None]]) -> None:
        """Run ``service()`` as a task until the daemon ends; its failure is told, and it begins anew after a pause."""

    def say(self, text: str) -> None:
        """Tell the operator of the daemon, in one line."""
