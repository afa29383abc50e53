"""What the machine under the daemon owes: a loop that is on time, and room on the disk; asked at every run's opening.

The disk has one floor (bench file, ``daemon: disk_floor``).  With less room no run is opened; a run in progress on
whose disk less remains is lowered, as with any record that cannot be kept.  The lease is held against the loop's worst
stall of about the last hour: a lease that a few such stalls in a row would use up is worth a reason, since it may
lapse in a run and no fault of the specimen.
"""

import os
from pathlib import Path
from typing import Any

from hvhost.bench.model import Bench
from hvhost.bench.service import STALLS_IN_A_LEASE
from hvhost.publish.snapshot import DiskView, LoopView
from hvhost.publish.stalls import StallGauge
from hvhost.words.errors import CommandRefused
from hvhost.words.findings import Finding, Grade
from hvhost.words.quantities import Dimension, format_quantity


class Machine:
    """See the module's text.  Against a stand-in a finding about the machine is a note: nothing real is energised."""

    def __init__(self, bench: Bench, runs_root: Path, *, rehearsal: bool = False) -> None:
        self.gauge = StallGauge()
        self.disk = DiskView(floor_b=bench.service.disk_floor_b)
        self._bench, self._root, self._rehearsal = bench, runs_root, rehearsal
        self._warned = False

    # ------------------------------------------------------------ the disk

    def look_at_disk(self) -> DiskView:
        """How much room there is; asks the file system, which may be slow: not for the loop's thread in mid-run."""
        free_b = free_bytes(self._root)
        if free_b is None:  # what cannot be told will be told by the recorder
            return DiskView(floor_b=self.disk.floor_b)
        return DiskView(free_b=free_b, floor_b=self.disk.floor_b, ok=free_b >= self.disk.floor_b)

    def require_room(self) -> None:
        """Raise `CommandRefused` where the disk is below its floor."""
        self.disk = self.look_at_disk()
        if not self.disk.ok:
            raise CommandRefused(f"at least {size_text(self.disk.floor_b)} free for the record (daemon.disk_floor)",
                                 f"{size_text(self.disk.free_b)} free", str(self._root), "make room, then ask again")

    @property
    def disk_text(self) -> str:
        """What is wrong with the room on the disk, in a sentence; '' where nothing is."""
        if self.disk.ok:
            return ""
        return (f"the disk of the runs folder has {size_text(self.disk.free_b)} left, below its floor of "
                f"{size_text(self.disk.floor_b)}")

    # ------------------------------------------------------------ the loop

    def loop_view(self, now_s: float) -> LoopView:
        """What is shown of the loop."""
        return self.gauge.view(now_s)

    def findings(self) -> tuple[Finding, ...]:
        """What a preflight is told about this machine."""
        stall_s = self.gauge.recent_s
        if not short_lease(self._bench.lease_s, stall_s):
            return ()
        return (Finding(
            grade=Grade.NOTE if self._rehearsal else Grade.REASON, file=Path(self._bench.file).name, line=0,
            what="lease.time", expected=f"at least {STALLS_IN_A_LEASE} times this machine's longest stall of the last "
            f"hour, {_seconds(stall_s)}", found=_seconds(self._bench.lease_s),
            remedy="take load off the machine, use --realtime, or lengthen the lease"),)

    def warning(self) -> str:
        """The sentence by which a lease found too short is told, once until it is long enough again; else ''."""
        short = short_lease(self._bench.lease_s, self.gauge.recent_s)
        told, self._warned = self._warned, short
        if not short or told:
            return ""
        stall, lease = _seconds(self.gauge.recent_s), _seconds(self._bench.lease_s)
        return (f"the event loop stood still for {stall}: the lease, {lease}, is shorter than {STALLS_IN_A_LEASE} "
                "times that and may lapse in a run")

    def note(self) -> dict[str, Any]:
        """What a run's record keeps of the machine at its close."""
        return {"loop": self.gauge.note(), "disk_free_b": self.disk.free_b, "disk_floor_b": self.disk.floor_b}


def short_lease(lease_s: float, stall_s: float) -> bool:
    """Whether a lease is shorter than ten times the longest stall."""
    return lease_s < STALLS_IN_A_LEASE * stall_s


def free_bytes(folder: Path) -> float | None:
    """Bytes that an ordinary user may still write where the folder is, or will be made; None where nobody can tell."""
    for path in (folder, *folder.absolute().parents):
        try:
            told = os.statvfs(path)
        except FileNotFoundError:
            continue
        except OSError:
            return None
        return float(told.f_bavail * told.f_frsize)
    return None


def size_text(size_b: float) -> str:
    """A size for people."""
    return format_quantity(size_b, Dimension.BYTE, 3)


def _seconds(seconds: float) -> str:
    return format_quantity(seconds, Dimension.SECOND, 3)
