"""B4, B5 and B6 under full load: how late the loop is, what the daemon takes of a processor, and its memory.

The daemon's own gauge says how late its loop was; a bare loop in a process of its own says at the same time what the
machine makes any loop wait.  So the longest stall is judged by the part that the daemon can have caused (its processor
time since the beat before, which bounds it from above), and shown whole beside the bare loop's.  Work that holds the
interpreter is judged by the processor time of the longest piece of it while a run is open, beside the median of a read
in the same daemon under the same load.  A read with the protective path in it is what a trip is and less, so that is
the stricter side.  One and the same work takes several times its median at worst on a machine that is shared, also by
processor time.  By how much is measured beside it and shown, but the bound is held against the piece as measured.
"""

import time
from dataclasses import dataclass, field
from statistics import median
from typing import Any

from hvhost.publish.client import Client
from hvhost.speed.bareloop import BareLoop
from hvhost.speed.figures import Line
from hvhost.speed.loaded import RATE_HZ, WATCHERS, Loaded
from hvhost.speed.setting import Setting
from hvhost.speed.standing import MEGABYTE, Seen, energise, look
from hvhost.words.errors import CannotConnect

EVERY_S = 1.0
READ = "the median of a read, the protective path in it, in the same daemon"
SETTLE_S = 2.0  # what a start and an opening of a run cost is not the load's
JUDGING_MINUTES = 60.0


@dataclass(slots=True)
class Watched:
    """What was seen of a loaded daemon; ``ends`` says why runs ended meanwhile, which none should."""

    seen: list[Seen] = field(default_factory=list)
    loop: dict[str, Any] = field(default_factory=dict)
    bare: dict[str, float] = field(default_factory=dict)
    ends: list[str] = field(default_factory=list)
    dropped: int = 0


def measure(setting: Setting) -> list[Line]:
    """Return the lines of B4, B5 and B6 under load."""
    with Loaded(setting) as loaded:
        client = loaded.client()
        energise(client, loaded.board)
        time.sleep(SETTLE_S)
        watched = _watch(setting, loaded, client)
    broker = "broker, " if loaded.broker else ""
    long = (f"{setting.minutes:g} min at 10 k pairs/s, recorder, {broker}{WATCHERS} watchers at {RATE_HZ:g} Hz and a "
            "stalled one")
    if setting.minutes < JUDGING_MINUTES:
        long += f" (shortened: {JUDGING_MINUTES:g} min judge it)"
    return [*_stalls(watched, long), _processor(watched, long), *_memory(watched, long)]


def _watch(setting: Setting, loaded: Loaded, client: Client) -> Watched:
    assert loaded.daemon.process is not None
    pid, watched = loaded.daemon.process.pid, Watched()
    bare, end_s = BareLoop(), time.monotonic() + setting.minutes * 60.0
    try:
        while (left_s := end_s - time.monotonic()) > 0.0:
            watched.seen.append(look(pid))
            setting.say(f"a daemon under load, {left_s:.0f} s to go, {watched.seen[-1].resident / MEGABYTE:.0f} MB")
            time.sleep(min(EVERY_S, left_s, setting.minutes * 3.0))
            shot = client.call("snapshot") or {}
            if shot.get("permission") != "running":
                watched.ends.append(_why(shot))
                energise(client, loaded.board)
    finally:
        watched.bare = bare.end()
    shot = client.call("snapshot") or {}
    watched.loop = shot.get("loop") or {}
    watched.dropped = sum(int(one["dropped"]) for one in shot.get("outlets") or ())
    watched.seen.append(look(pid))
    if not watched.loop.get("longest_s"):
        raise CannotConnect("a daemon that tells its stalls", repr(watched.loop), "speed B4")
    return watched


def _why(shot: dict[str, Any]) -> str:
    lines = [event["text"] for event in shot.get("events") or () if event.get("severity") != "note"]
    return "; ".join(lines[-3:]) or str(shot.get("permission"))


def _stalls(watched: Watched, long: str) -> list[Line]:
    loop, bare = watched.loop, watched.bare
    beside = (f"the whole of it {1e3 * loop['longest_s']:.1f} ms, in the run {1e3 * loop['run_s']:.1f} ms; a bare loop "
              f"beside it: longest {1e3 * bare['longest_s']:.1f} ms, p99.9 {1e3 * bare['p999_s']:.1f} ms")
    ended = f"; runs that ended meanwhile: {' | '.join(watched.ends)}" if watched.ends else ""
    machine = bare["p999_s"] >= 0.02
    ratio, swelling = loop["run_piece_own_s"] / loop["read_s"], max(1.0, bare["swelling"])
    return [
        Line(budget="B4", what="lateness of the loop under load, p99.9", measured=1e3 * loop["p999_s"], unit="ms",
             bound=20.0, against=long, judged=not machine, raw={"loop": loop, "bare": bare, "ends": watched.ends},
             note=("not judged: a bare loop's is no better; " if machine else "") + beside),
        Line(budget="B4", what="longest stall, the daemon's own part at most", measured=1e3 * loop["own_s"], unit="ms",
             bound=50.0, against=long, note=beside + ended),
        Line(budget="B4", what="longest piece of work in a run", measured=ratio, unit="x", bound=20.0, aim=10.0,
             against=READ, note=_piece(watched)),
        Line(budget="B4", what="the same less the swelling of a fixed work", measured=ratio / swelling, unit="x",
             bound=20.0, against=READ, judged=False, note=f"it swelled {swelling:.1f} times at worst beside it"),
    ]


def _piece(watched: Watched) -> str:
    loop = {name: 1e3 * value if isinstance(value, float) else value for name, value in watched.loop.items()}
    return (f"{loop['run_piece']} {loop['run_piece_own_s']:.2f} ms against {loop['read_s']:.3f} ms; a whole turn of "
            f"the loop {loop['run_turn_own_s']:.2f} ms; the turn that opened the run, with nothing energised, "
            f"{loop['turn_own_s']:.1f} ms")


def _processor(watched: Watched, long: str) -> Line:
    first, last = watched.seen[0], watched.seen[-1]
    return Line(budget="B5", what="processor of the daemon at 10 k pairs/s",
                measured=(last.cpu_s - first.cpu_s) / (last.at_s - first.at_s), unit="core", bound=0.25, aim=0.1,
                against=long, note=f"{watched.dropped} notifications dropped, the stalled watcher's")


def _memory(watched: Watched, long: str) -> list[Line]:
    seen = watched.seen
    fifth = max(1, len(seen) // 5)
    early = median(one.resident for one in seen[fifth : 2 * fifth] or seen)
    late = median(one.resident for one in seen[-fifth:])
    counts = [one.descriptors for one in seen]
    return [
        Line(budget="B6", what="resident memory under load, largest",
             measured=max(one.resident for one in seen) / MEGABYTE, unit="MB", bound=150.0, aim=80.0, against=long,
             raw={"resident": [one.resident for one in seen], "descriptors": counts}),
        Line(budget="B6", what="growth of resident memory under load", measured=(late - early) / MEGABYTE, unit="MB",
             bound=1.0, aim=0.0, against=f"median of the last fifth less that of the second, {long}"),
        Line(budget="B6", what="descriptors under load, largest less smallest",
             measured=float(max(counts) - min(counts)), unit="", bound=1.0, against=f"{min(counts)} open, {long}",
             note="the stalled watcher is thrown out after 30 s, and comes again"),
    ]
