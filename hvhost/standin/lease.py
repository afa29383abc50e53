"""The lease: how long the host is trusted without a sign that it judged a sample.

A renewal carries the index of the last sample judged; the lease then ends one lease after *that sample's* tick,
whenever the renewal came.
"""

from hvhost.standin.core import PREPARING, Core, Timer
from hvhost.wire.vocabulary import Cause, CutWhy, EventKind, LowerWhy, McuState, VoidWhy


class Lease:
    """Whether a lease runs, when it ends, and how many renewals were not accepted."""

    def __init__(self, core: Core) -> None:
        self.core = core
        self.running = False
        self.length = 0
        self.rejected = 0
        self._last = 0

    def open(self, lease_ms: int) -> None:
        """A session begins: the last renewal is forgotten; only samples taken from now on count."""
        self.length = self.core.config.ticks(lease_ms)
        self.running = False
        self.rejected = 0
        self._last = self.core.index
        self.core.stop_timer(Timer.LEASE)

    def renew(self, low_index: int) -> None:
        """Take a renewal if its sample is taken, newer than the last one and younger than one lease; else count it."""
        core = self.core
        index = core.unwrap(low_index)
        taken = core.sample_tick(index)
        if not self._last < index <= core.index or core.now - taken >= self.length:
            self.rejected += 1
            return
        self._last = index
        self.running = True
        core.set_timer(Timer.LEASE, taken + self.length)

    def lapse(self) -> None:
        """The lease is over: an arm is void; energised it lowers, pausing it cuts, and both latch."""
        core = self.core
        core.stop_timer(Timer.LEASE)
        self.running = False
        if core.state not in (McuState.OFF, McuState.LOWERING):
            core.event(EventKind.LAPSE, core.state)
        if core.state is McuState.ENERGISED:
            core.lower(LowerWhy.LAPSE)
            core.latch.add(Cause.HOST_SILENT, core.index)
        elif core.state is McuState.PAUSING:
            core.cut(CutWhy.LAPSE, void=VoidWhy.LAPSE, cause=Cause.HOST_SILENT, detail=core.index)
        elif core.state in PREPARING:
            core.lower(LowerWhy.LAPSE)
