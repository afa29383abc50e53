"""The daemon: moves bytes, time and requests between the world and one station, in one TaskGroup.

Nothing here decides.  The read callback runs the whole protective chain before it returns; timers, snapshots, the
local socket and the closing of records come after.  Whatever ends the daemon, its last act is to lower and to wait,
bounded, for the MCU to be off.
"""

import asyncio
import contextlib
import gc
import json
import os
import pwd
import secrets
import signal
import sys
import threading
from collections.abc import Callable, Coroutine
from pathlib import Path
from typing import Any

from hvhost.bench.model import Bench
from hvhost.ports.clock import SystemClock
from hvhost.ports.descriptor import DescriptorPort
from hvhost.ports.opening import open_port
from hvhost.ports.scheduling import raise_thread, take_realtime
from hvhost.ports.terminals import may_reopen
from hvhost.publish import delivering, instrument, mqtt
from hvhost.publish.conversation import Peer
from hvhost.publish.life import Life
from hvhost.publish.local import LocalServer
from hvhost.publish.log import Log
from hvhost.publish.notify import Notifier
from hvhost.publish.outlet import Host, Outlet, Publisher
from hvhost.publish.places import socket_path
from hvhost.publish.readings import ReadingsFeed, figures_of
from hvhost.publish.snapshot import Snapshot
from hvhost.publish.station import CloseJob, Station, end_recording
from hvhost.record.catalogue import unclosed
from hvhost.record.folder import RunFolder
from hvhost.record.recorder import Recorder
from hvhost.supervisor import arming
from hvhost.supervisor.runs import Outcome
from hvhost.supervisor.states import Permission
from hvhost.words.errors import CannotConnect, HvhostError, RecordFault

SWITCH_S = 0.0005  # the recorder's thread gives the interpreter back within this; the default of 5 ms is a late cut
SNAPSHOT_S = 0.1  # ten pictures a second
REOPEN_S = (0.5, 1.0, 2.0)  # pauses between attempts to open a port that is gone; the last one repeats
LAST_LOWER_S = 2.0  # how long the end waits for a lowering, beyond the longest that the MCU may take
SERVICE_AGAIN_S = 5.0
ATTACHED: tuple[Callable[[Bench, Host], None], ...] = (  # each makes its outlet where the bench file names it
    mqtt.attach,
    delivering.attach,
    instrument.attach,
)
CLOSE_S = 600.0  # exporting and repacking a day of samples takes minutes
RECORDER = "recorder"  # the name of the recorder's thread
SLACK_S = 0.0005  # a deadline this much earlier than the set timer is not worth another timer


class Daemon:
    """One bench served until it is told to stop."""

    def __init__(self, bench: Bench, *, socket: str = "", runs_root: Path | None = None, device: str = "",
                 rehearsal: bool = False, log: Log | None = None, notifier: Notifier | None = None,
                 realtime: bool = False) -> None:
        self.bench, self.device = bench, device or bench.port.device
        self.say = log or Log()
        self.clock, self.realtime = SystemClock(), realtime
        self.station = Station(
            bench, self.clock, lambda: 1 + secrets.randbelow(0xFFFFFFFF),
            runs_root=runs_root or Path(bench.runs_folder).expanduser(), openers=self._open_recorder,
            write=self._write, on_close=self._close_later, port=self.device, rehearsal=rehearsal)
        self.gauge = gauge = self.station.machine.gauge
        self.life = Life(self.station, notifier or Notifier(), self.say)
        self.publisher = Publisher()
        self.readings = ReadingsFeed(lambda: figures_of(self.station.core, self.station.utc_of))
        self.station.composer.listeners.append(self.readings.take)
        self.server = LocalServer(socket_path(bench.name, socket), gauge.timed("request", self._handle),
                                  peer_gone=self._peer_gone, note=self._client_note, readings=self.readings)
        self._picture = gauge.timed("snapshot", self._compose)
        self._offer = gauge.timed("offer", lambda offers: next(offers, ""))
        self._read = gauge.timed("read", self._bytes)
        self._tick = gauge.timed("timer", self._time_passed)
        self.server.tell = gauge.timed("tell", self.server.tell)
        self.publisher.add(self.server)
        self.ready = asyncio.Event()
        self._port: DescriptorPort | None = None
        self._stop = asyncio.Event()
        self._lost = asyncio.Event()
        self._loop: asyncio.AbstractEventLoop | None = None
        self._timer: asyncio.TimerHandle | None = None
        self._group: asyncio.TaskGroup | None = None
        self._tickets: dict[int, set[str]] = {}
        self._services: list[tuple[str, Callable[[], Coroutine[Any, Any, None]]]] = []
        self._tasks: list[asyncio.Task[None]] = []
        for attach in ATTACHED:
            attach(bench, _Attached(self))

    # ------------------------------------------------------------ life

    async def run(self) -> None:
        """Serve until `stop`; raises `CannotConnect` or `RecordFault` where it cannot begin."""
        self._loop = asyncio.get_running_loop()
        port = open_port(self.device, self.bench.port.baud)
        try:
            await self.server.open()
        except HvhostError:
            os.close(port.fd)
            raise
        try:
            with contextlib.suppress(NotImplementedError, ValueError):  # no signals outside the main thread
                for number in (signal.SIGINT, signal.SIGTERM):
                    self._loop.add_signal_handler(number, self.stop)
            async with asyncio.TaskGroup() as group:
                self._group = group
                if self.realtime:
                    refused = take_realtime()
                    self.say(f"real-time scheduling refused: {refused}" if refused else "real-time scheduling taken")
                self._attach(port)
                gc.collect()
                sys.setswitchinterval(SWITCH_S)
                gc.freeze()  # a full collection of what lives for ever would stall the loop
                self._tasks = [group.create_task(self._publish()), group.create_task(self._reopen()),
                               group.create_task(self._recover()), group.create_task(self.life.beat()),
                               group.create_task(self.life.look_at_disk())]
                for name, service in self._services:
                    self.add_service(name, service)
                self.gauge.start()
                self.ready.set()
                self.life.notifier.ready(f"serving {self.bench.name}, port {self.device}")
                await self._stop.wait()
                self.life.ending()
                await self._lower_last()
                for task in self._tasks:
                    task.cancel()
        finally:
            self.gauge.stop()
            await self.server.close()
            if self._port is not None:
                self._port.close()

    def stop(self) -> None:
        """End the daemon: lower first."""
        self._stop.set()

    async def _lower_last(self) -> None:
        """Nothing of ours stays energised: lower, and wait for the MCU to say that it is off."""
        core = self.station.core
        if self._permitted() and core.link is not None:
            self.say("lowering before the daemon ends")
            with contextlib.suppress(HvhostError):
                self.station.command("lower", {}, "hvhost ending")
            until = self.clock.now_s() + self.bench.lower_max_s + LAST_LOWER_S
            while self._permitted() and self.clock.now_s() < until:
                await asyncio.sleep(0.02)
            if self._permitted():
                self.say("not lowered in time: use the emergency switching off")
        run = core.run
        if run is not None and self.station.recording is not None:
            run.end(Outcome.INTERRUPTED, "the daemon ended")
            arming.close(core, run, self.clock.now_s())
            self.station.after()
        while self.station.closing:
            self.life.closing()
            await asyncio.sleep(0.02)

    def _permitted(self) -> bool:
        return self.station.core.state.permission is not Permission.IDLE

    async def _recover(self) -> None:
        """Close what an earlier daemon left open, as interrupted; nothing is resumed (S8), nothing waits for it."""
        root = self.station.runs_root
        self.station.settled = False
        try:
            for folder in await asyncio.to_thread(unclosed, root) if root.exists() else ():
                if folder != self.station.folder:
                    await self._recover_one(folder)
            await asyncio.to_thread(self.station.requests.remembered.runs)  # or the first preflight would read it all
        finally:
            self.station.settled = True

    async def _recover_one(self, folder: RunFolder) -> None:
        try:
            await _closing("--recover", str(self.clock.utc_ns()), str(folder.path))
            self.say(f"run {folder.name} was left open: closed as interrupted")
        except (HvhostError, OSError, TimeoutError) as error:
            self.say(f"run {folder.name} cannot be recovered: {error}")

    # ------------------------------------------------------------ the port

    def _attach(self, port: DescriptorPort) -> None:
        self._port = port
        port.attach(self._read, self._room, self._gone)
        self.station.connect()
        self._schedule()

    def _bytes(self, data: bytes) -> None:
        self.station.feed(data)
        self.life.read_was_judged()
        self._schedule()

    def _room(self) -> None:
        self.station.flush()
        self._schedule()

    def _write(self, data: bytes) -> bytes:
        return self._port.write_nowait(data) if self._port is not None else b""

    def _gone(self, reason: str) -> None:
        self._port = None
        self.station.gone(reason)
        self.say(f"port {self.device} lost: {reason}")
        self._lost.set()

    async def _reopen(self) -> None:
        """Open the port again whenever it is gone; a new session is passive and resumes nothing."""
        while True:
            await self._lost.wait()
            self._lost.clear()
            attempt = 0
            while self._port is None:
                await asyncio.sleep(REOPEN_S[min(attempt, len(REOPEN_S) - 1)])
                attempt += 1
                if not may_reopen(self.device):
                    continue  # somebody's terminal may have taken the number of the one that was lost
                with contextlib.suppress(CannotConnect):
                    # a serial server that does not answer, a driver that waits: not on the loop's thread
                    self._attach(await asyncio.to_thread(open_port, self.device, self.bench.port.baud))
                    self.say(f"port {self.device} is back")

    # ------------------------------------------------------------ time

    def _schedule(self) -> None:
        loop, due = self._loop, self.station.deadline()
        if loop is None or due is None:
            return
        timer = self._timer
        if timer is not None and not timer.cancelled() and timer.when() <= due + SLACK_S:
            return
        if timer is not None:
            timer.cancel()
        self._timer = loop.call_at(max(due, loop.time() + SLACK_S), self._tick)

    def _time_passed(self) -> None:
        self._timer = None
        self.station.tick()
        self._schedule()

    async def _publish(self) -> None:
        while True:
            snapshot = self._picture()
            await asyncio.sleep(0)  # between two pieces of it the loop looks at the port
            offers = self.publisher.offers(snapshot)
            while self._offer(offers):
                await asyncio.sleep(0)
            self.life.shown(snapshot)
            await asyncio.sleep(SNAPSHOT_S)

    def _compose(self) -> Snapshot:
        return self.station.snapshot(self.publisher.views())

    def ask(self, method: str, params: dict[str, Any], who: str) -> dict[str, Any]:
        """Carry out one request of an outlet."""
        try:
            return self.station.handle(method, params, who)
        finally:
            self._schedule()

    def add_service(self, name: str, service: Callable[[], Coroutine[Any, Any, None]]) -> None:
        """Run a task of an outlet beside everything else; its failure is told and never ends the daemon."""
        if self._group is None:
            self._services.append((name, service))
        else:
            self._tasks.append(self._group.create_task(self._serve(name, service), name=name))

    async def _serve(self, name: str, service: Callable[[], Coroutine[Any, Any, None]]) -> None:
        while True:
            try:
                await service()
                return
            except Exception as error:  # an outlet's fault stays with the outlet
                self.say(f"{name}: {type(error).__name__}: {error}; tried again in {SERVICE_AGAIN_S:g} s")
            await asyncio.sleep(SERVICE_AGAIN_S)

    def add_outlet(self, outlet: Outlet) -> None:
        """Offer every snapshot to one more outlet."""
        self.publisher.add(outlet)

    # ------------------------------------------------------------ requests

    def _handle(self, method: str, params: dict[str, Any], peer: Peer) -> Any:
        who = str(params.pop("as", "")).strip()[:80] or user_name(peer.uid)
        if method == "seat.take":
            ticket = str(params.get("ticket") or secrets.token_hex(8))
            params["ticket"] = ticket
            result = self.station.handle(method, params, who)
            self._tickets.setdefault(peer.number, set()).add(ticket)
            self._schedule()
            return {**result, "ticket": ticket}
        if method == "shutdown":
            self.stop()
            return {"ending": True}
        result = self.station.handle(method, params, who)
        self._schedule()
        return result

    def _peer_gone(self, peer: Peer) -> None:
        for ticket in self._tickets.pop(peer.number, ()):
            self.station.handle("seat.release", {"ticket": ticket}, "a connection that closed")

    def _client_note(self, text: str) -> None:
        """Who came and went stands in the record of a run; on the screen it would drown what matters."""
        self.station.core.note(self.clock.now_s(), "client", text=text)

    # ------------------------------------------------------------ records

    def _open_recorder(self, folder: Any, meta: Any, *, tag: int, signs: str,
                       on_failed: Callable[[str], None]) -> Recorder:
        loop = self._loop
        assert loop is not None
        made = Recorder.open(folder, meta, tag=tag, signs=signs,
                             on_failed=lambda reason: _soon(loop, on_failed, reason))
        if self.realtime:
            for thread in threading.enumerate():
                if thread.name == RECORDER:
                    raise_thread(thread)
        return made

    def _close_later(self, job: CloseJob) -> None:
        if self._group is not None:
            self._group.create_task(self._close(job))

    async def _close(self, job: CloseJob) -> None:
        """Close the recorder off the loop's thread, then the folder in a process of its own."""
        verdict = "not decided: the record could not be closed"
        try:
            await asyncio.to_thread(end_recording, job)
            verdict = str(json.loads(await _closing(str(job.folder.path)))["verdict"])
        except (HvhostError, OSError, TimeoutError, ValueError, KeyError) as error:
            self.say(f"closing run {job.folder.name}: {error}")
        finally:
            self.station.closed(verdict)


class _Attached:
    """The daemon as an outlet sees it: what an outlet says stands in the record of the run as well.

    It makes no line on screens: an outlet that forwards those lines would forward its own complaints for ever.
    """

    def __init__(self, daemon: Daemon) -> None:
        self._daemon = daemon
        self.ask, self.add_outlet, self.add_service = daemon.ask, daemon.add_outlet, daemon.add_service

    def say(self, text: str) -> None:
        """Tell the operator of the daemon and the record."""
        self._daemon.say(text)
        self._daemon.station.core.note(self._daemon.clock.now_s(), "outlet", text=text)


async def _closing(*arguments: str) -> bytes:
    """Close or recover a run folder in a process of its own: nothing of it holds the loop or the interpreter."""
    child = await asyncio.create_subprocess_exec(
        sys.executable, "-m", "hvhost.report.closing", *arguments, stdin=asyncio.subprocess.DEVNULL,
        stdout=asyncio.subprocess.PIPE, stderr=asyncio.subprocess.PIPE)
    out, err = await asyncio.wait_for(child.communicate(), CLOSE_S)
    if child.returncode:
        raise RecordFault(err.decode(errors="replace").strip() or f"exit code {child.returncode}")
    return out


def user_name(uid: int) -> str:
    """The login name of a user, or the number where there is none."""
    try:
        return pwd.getpwuid(uid).pw_name
    except (KeyError, OverflowError):
        return f"uid {uid}"


def _soon(loop: asyncio.AbstractEventLoop, call: Callable[[str], None], reason: str) -> None:
    with contextlib.suppress(RuntimeError):  # the loop is closed already
        loop.call_soon_threadsafe(call, reason)

