"""The daemon's relation to whoever runs it: the service manager, its watchdog, the log, the disk's room.

All of it follows the protective path and none of it waits: the manager is told by datagrams that may be lost, the log
is a queue, the disk is asked in a thread.
"""

import asyncio

from hvhost.publish.log import Log
from hvhost.publish.notify import Notifier, Watchdog
from hvhost.publish.snapshot import Snapshot
from hvhost.publish.station import Station
from hvhost.samples.blocks import Flags, SampleBlock
from hvhost.supervisor.states import Permission

DISK_S = 2.0  # at 10 k pairs/s a run writes 200 kB meanwhile
STATUS_S = 1.0
TURN_S = 1.0  # the idle beat where nobody asks for another
SLACK_S = 30.0  # beyond the longest lower: for the port's answer and the record's close to begin
CLOSING_S = 10.0  # asked for again and again while records are closed


class Life:
    """See the module's text; the daemon calls these at the places that their names say."""

    def __init__(self, station: Station, notifier: Notifier, log: Log) -> None:
        self.station, self.notifier, self.log = station, notifier, log
        self.watchdog = Watchdog(notifier)
        self._sample: SampleBlock | None = None
        self._line = 0
        self._status = ("", float("-inf"))
        self._extended_s = float("-inf")

    def read_was_judged(self) -> None:
        """Behind the protective chain of a read: feed the watchdog where it judged a fresh block."""
        sample = self.station.core.sample
        if sample is not None and sample is not self._sample:
            self._sample = sample
            if not sample.flags & Flags.STALE:
                self.watchdog.judged(self.station.clock.now_s())

    async def beat(self) -> None:
        """The loop's own beat: feeds the watchdog only while the bench is idle."""
        while True:
            idle = self.station.core.state.permission is Permission.IDLE
            self.watchdog.turned(self.station.clock.now_s(), idle=idle)
            await asyncio.sleep(min(TURN_S, self.watchdog.every_s or TURN_S))

    async def look_at_disk(self) -> None:
        """Watch the room on the disk; a file system that hangs holds a thread and nothing else."""
        while True:
            self.station.look_at_machine(await asyncio.to_thread(self.station.machine.look_at_disk))
            await asyncio.sleep(DISK_S)

    def shown(self, snapshot: Snapshot) -> None:
        """Behind each snapshot: forward what was said since the last one, and the state where it changed."""
        core = self.station.core
        for line in core.log:
            if line.number > self._line:
                self._line = line.number
                run = {"run": core.run.spec.run_id} if core.run is not None else {}
                self.log.write(line.severity, line.text, n=line.number, **run)
        text = status_text(snapshot)
        if text != self._status[0] and snapshot.now_s - self._status[1] >= STATUS_S:
            self._status = (text, snapshot.now_s)
            self.notifier.status(text)

    def ending(self) -> None:
        """The daemon was told to end: it lowers first, and says how long that may take."""
        self.notifier.stopping("lowering, then closing the record", self.station.core.bench.lower_max_s + SLACK_S)

    def closing(self) -> None:
        """A record is being closed: ask for more time before the manager's patience ends."""
        now_s = self.station.clock.now_s()
        if now_s - self._extended_s >= CLOSING_S / 2:
            self._extended_s = now_s
            self.notifier.extend(CLOSING_S + SLACK_S)


def status_text(snapshot: Snapshot) -> str:
    """The state in a few words that do not change with every sample."""
    parts = [f"link {snapshot.link}", str(snapshot.phase or snapshot.permission), f"voltage {snapshot.voltage}"]
    if snapshot.latched:
        parts.append("latched: " + ", ".join(snapshot.latched))
    if snapshot.run is not None and not snapshot.run.ended:
        parts.append(f"run {snapshot.run.run_id}")
    if snapshot.stop:
        parts.append(str(snapshot.stop))
    return "; ".join(parts)
