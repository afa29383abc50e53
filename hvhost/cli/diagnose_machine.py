"""What a diagnosis says of the machine: versions, clock, disk, scheduling, and how long its event loop stands still."""

import asyncio
import os
import platform
import re
import sys
import tempfile
import time
from collections.abc import Iterator
from importlib.metadata import PackageNotFoundError, requires, version
from pathlib import Path

from hvhost.bench.model import Bench
from hvhost.bench.service import STALLS_IN_A_LEASE
from hvhost.cli.diagnosis import Check, attention, fault, note, ok, unknown
from hvhost.ports.kernel import clock_state
from hvhost.ports.scheduling import give_back, take_realtime
from hvhost.publish.machine import free_bytes, short_lease, size_text
from hvhost.publish.stalls import StallGauge
from hvhost.words.quantities import Dimension, format_quantity

OLDEST_PYTHON = (3, 11)
BUILT_NS = 1_767_225_600_000_000_000  # 2026-01-01T00:00:00Z: a clock before this was never set
WORST_CLOCK_S = 1.0
SLOW_SYNC_S = 0.2
REQUIREMENT = re.compile(r"([A-Za-z0-9_.-]+)[^;]*?>=([0-9.]+)")


def check_versions() -> Iterator[Check]:
    """Python and every required package, each at least as new as this version asks for."""
    here = sys.version_info[:3]
    text = ".".join(map(str, here))
    if here[:2] < OLDEST_PYTHON:
        yield fault("python", text, "3.11 or newer is needed")
    else:
        yield ok("python", f"{text} on {platform.system()} {platform.release()}")
    try:
        yield ok("hvhost", version("hvhost"))
        wanted = requires("hvhost") or []
    except PackageNotFoundError:
        yield attention("hvhost", "not installed as a package", "install it with pip, so that its parts are known")
        return
    yield from (_package(line) for line in wanted if "extra" not in line and REQUIREMENT.match(line))


def _package(requirement: str) -> Check:
    match = REQUIREMENT.match(requirement)
    assert match is not None
    name, least = match.groups()
    try:
        found = version(name)
    except PackageNotFoundError:
        return fault(name, "not installed", f"pip install '{requirement}'")
    if _numbers(found) < _numbers(least):
        return fault(name, f"{found}, older than {least}", f"pip install '{requirement}'")
    return ok(name, found)


def _numbers(text: str) -> tuple[int, ...]:
    return tuple(int(part) for part in re.findall(r"[0-9]+", text)[:3])


def check_clock() -> Check:
    """Records carry UTC; control never uses it, so a wrong clock harms the record and nothing else."""
    now_ns = time.time_ns()
    if now_ns < BUILT_NS:
        return fault("clock", time.strftime("%Y-%m-%d", time.gmtime(now_ns // 10**9)), "set it: records carry UTC")
    state = clock_state()
    if state is None:
        return unknown("clock", "the system does not say whether it is synchronised")
    if not state.synchronised:
        return attention("clock", "not synchronised", "let a time service run (NTP or PTP): records carry UTC")
    worst = format_quantity(state.worst_s, Dimension.SECOND, 2)
    if state.worst_s > WORST_CLOCK_S:
        return attention("clock", f"synchronised, but wrong by up to {worst}", "see what the time service says")
    return ok("clock", f"synchronised, wrong by at most {worst}")


def check_disk(bench: Bench, root: Path) -> Iterator[Check]:
    """Room above the floor, a runs folder that can be written, and how long a sync takes."""
    floor_b = bench.service.disk_floor_b
    free_b = free_bytes(root)
    if free_b is None:
        yield unknown("disk", f"{root}: the file system does not say how much room there is")
    elif free_b < floor_b:
        yield fault("disk", f"{size_text(free_b)} free for {root}, below the floor of {size_text(floor_b)}",
                    "make room: no run is opened below the floor")
    else:
        yield ok("disk", f"{size_text(free_b)} free for {root}, floor {size_text(floor_b)}")
    place = next(path for path in (root, *root.absolute().parents) if path.exists())
    if place != root:
        yield note("runs folder", f"{root} is made by the first run")
    if not os.access(place, os.W_OK | os.X_OK):
        yield fault("runs folder", f"{place} cannot be written", "give this user the folder, or name another one")
        return
    yield _sync_time(place)


def _sync_time(place: Path) -> Check:
    begun_s = time.monotonic()
    try:
        with tempfile.TemporaryFile(dir=place) as file:
            file.write(b"\0" * 4096)
            file.flush()
            os.fsync(file.fileno())
    except OSError as error:
        return fault("disk writing", f"{place}: {error.strerror}", "a run without a record is not energised")
    taken_s = time.monotonic() - begun_s
    text = f"a synced write takes {format_quantity(taken_s, Dimension.SECOND, 2)}"
    if taken_s > SLOW_SYNC_S:
        return attention("disk writing", text, "the recorder syncs twice a second and waits off the loop; see the disk")
    return ok("disk writing", text)


def check_realtime() -> Check:
    """Whether `serve --realtime` would be permitted."""
    refused = take_realtime()
    if refused:
        return note("real-time scheduling", f"refused: {refused}", "or leave it: budgets hold without it")
    give_back()
    return ok("real-time scheduling", "permitted")


def check_loop(bench: Bench, seconds: float) -> Check:
    """The longest stall of a bare event loop on this machine, beside the bench's lease."""
    gauge = StallGauge()
    with asyncio.Runner(loop_factory=lambda: asyncio.SelectorEventLoop(gauge.selector())) as runner:
        runner.run(_beat(gauge, seconds))
    stall, tail = (format_quantity(s, Dimension.SECOND, 3) for s in (gauge.late.longest_s, gauge.late.quantile(0.999)))
    text = f"longest stall {stall}, p99.9 {tail} in {seconds:g} s of a bare loop"
    if short_lease(bench.lease_s, gauge.late.longest_s):
        lease = format_quantity(bench.lease_s, Dimension.SECOND, 3)
        return attention("event loop", f"{text}: the lease, {lease}, is shorter than {STALLS_IN_A_LEASE} times that",
                         "take load off the machine, use --realtime, or lengthen the lease")
    return ok("event loop", text)


async def _beat(gauge: StallGauge, seconds: float) -> None:
    gauge.start()
    await asyncio.sleep(seconds)
    gauge.stop()
