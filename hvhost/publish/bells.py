"""When the view rings: at the end of a hold, when a reading is due, at the end of a pause, and at a trip.

The first three can be switched; a trip rings in any case, and so does a cut that is not confirmed and an output that
became unknown while energised.  Pure: snapshots and the time in, rings out.
"""

from hvhost.publish import wording
from hvhost.publish.snapshot import Permission, Phase, Snapshot, StopState
from hvhost.publish.wording import ENERGISED, View

TRIP_RINGS = 3
TRIP_EVERY_S = 0.7
LATE_S = 0.3  # a reading that was due by so much after the last snapshot was taken, not forgone


class Bell:
    """Compares each snapshot with the one before it; ``enabled`` switches everything but the danger's rings."""

    def __init__(self, enabled: bool = True) -> None:
        self.enabled = enabled
        self._before: Snapshot | None = None
        self._danger: frozenset[str] = frozenset()
        self._left, self._due_s = 0, 0.0

    def switch(self) -> None:
        """The bell's key."""
        self.enabled = not self.enabled

    def rings(self, snapshot: Snapshot, view: View, now_s: float) -> bool:
        """Whether to ring now; ``now_s`` is the view's monotonic time."""
        danger = _dangers(snapshot, view)
        if danger - self._danger and self._before is not None:
            self._left, self._due_s = TRIP_RINGS, now_s
        self._danger = danger
        before, self._before = self._before, snapshot
        if self._left and now_s >= self._due_s:
            self._left -= 1
            self._due_s = now_s + TRIP_EVERY_S
            return True
        return self.enabled and before is not None and before is not snapshot and _due(before, snapshot)


def _dangers(snapshot: Snapshot, view: View) -> frozenset[str]:
    """What always rings when it begins."""
    found = {f"latched {cause}" for cause in snapshot.latched}
    if snapshot.stop is StopState.CUT_NOT_CONFIRMED:
        found.add("cut not confirmed")
    if snapshot.permission in ENERGISED and wording.output_unknown(snapshot, view):
        found.add("output unknown")
    return frozenset(found)


def _due(before: Snapshot, now: Snapshot) -> bool:
    """Whether between these two a hold ended, a reading fell due or a pause was over."""
    if before.run is None or now.run is None or before.run.run_id != now.run.run_id:
        return False
    if before.permission is Permission.PAUSING and now.permission is Permission.RUNNING:
        return True
    hold, left_s = before.run.hold, before.run.next_reading_s
    if left_s is not None and left_s != now.run.next_reading_s and \
            left_s - (now.now_s - before.now_s) <= LATE_S and (now.run.next_reading_s or left_s + 1.0) > left_s:
        return True
    over = now.run.step_number != before.run.step_number or now.run.ended
    return before.phase is Phase.HOLD and hold is not None and over and not now.latched
