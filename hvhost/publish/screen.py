"""The screen's process: follows the snapshots, draws, rings, and lets keys stop.

A terminal that stops taking output blocks this process and no other; its keys are read by a thread with a
connection of its own, so that they stop then too.  The size is asked for at each drawing, so a terminal may be
resized while it runs.
"""

import os
import sys
import time
from collections.abc import Callable
from dataclasses import dataclass
from queue import Empty, SimpleQueue
from typing import TextIO

from rich.console import Console, Group
from rich.live import Live

from hvhost.publish import plots
from hvhost.publish.bells import Bell
from hvhost.publish.display import bench_display
from hvhost.publish.following import Follower
from hvhost.publish.keys import Act, KeyReader
from hvhost.publish.plain import CANNOT_STOP, PlainFollower, status_lines
from hvhost.publish.snapshot import Snapshot
from hvhost.publish.stopkeys import Stopper
from hvhost.publish.view import screen
from hvhost.publish.wording import ENERGISED, Plotted, View
from hvhost.words.errors import CannotConnect

RATE_HZ = 10.0
REDRAW_S = 0.2  # countdowns and ages move without a new snapshot
SWITCH_S = 0.0005  # drawing holds the interpreter; a key that stops must not wait for a picture
FIRST_S = 5.0  # a daemon that runs publishes several times a second
GONE = "DAEMON GONE: output unknown - use the emergency switching off"

Until = Callable[[Snapshot], bool]


def never(_: Snapshot) -> bool:
    """Return that the view does not end by itself."""
    return False


class Acts:
    """What keys ask for: stops go out at once in the key thread, the rest waits for the loop.

    With ``interrupt_stops`` the first Ctrl-C lowers and the next one cuts; without it Ctrl-C leaves.
    """

    def __init__(self, stopper: Stopper, interrupt_stops: bool, monotonic: Callable[[], float]) -> None:
        self._stopper, self._interrupt_stops, self._monotonic = stopper, interrupt_stops, monotonic
        self._interrupts = 0
        self._waiting: SimpleQueue[Act] = SimpleQueue()

    def act(self, act: Act) -> None:
        """Carry out a key."""
        if act is Act.INTERRUPT and self._interrupt_stops:
            self._interrupts += 1
            act = Act.LOWER if self._interrupts == 1 else Act.CUT
        if act in (Act.CUT, Act.LOWER):
            self._stopper.press(str(act), self._monotonic())
        else:
            self._waiting.put(act)

    def taken(self) -> list[Act]:
        """Return the keys that are not stops and came since, in order."""
        found = []
        while True:
            try:
                found.append(self._waiting.get_nowait())
            except Empty:
                return found


@dataclass(frozen=True, slots=True, kw_only=True)
class Look:
    """How the screen looks and sounds at first; ``ascii_only`` None asks the terminal.

    ``bench_display`` is the page for the display beside the arm input.
    """

    bench_display: bool = False
    bell: bool = True
    plotted: Plotted = Plotted.BY_STATE
    colour: bool = True
    ascii_only: bool | None = None


def show_once(path: str, out: TextIO) -> None:
    """Print the present status in lines; raises CannotConnect."""
    follower = Follower(path, RATE_HZ)
    follower.open(time.monotonic())
    try:
        snapshot = _first(follower)
        print("\n".join([*status_lines(snapshot, View(can_stop=False)), CANNOT_STOP]), file=out)
    finally:
        follower.close()


def show_lines(path: str, out: TextIO, until: Until = never) -> bool:
    """Print lines until ``until`` says so or Ctrl-C; returns False where the daemon went away instead.

    Raises CannotConnect where there is none at the start.
    """
    follower, lines = Follower(path, RATE_HZ), PlainFollower()
    follower.open(time.monotonic())
    print(CANNOT_STOP, file=out, flush=True)
    try:
        while follower.connected:
            now_s = time.monotonic()
            follower.wait_change(now_s, REDRAW_S)
            if follower.snapshot is None:
                continue
            view = View(since_s=max(0.0, now_s - follower.came_s), period_s=1.0 / RATE_HZ, can_stop=False)
            for line in lines.lines(follower.snapshot, view, now_s):
                print(line, file=out, flush=True)
            if until(follower.snapshot):
                return True
        print(GONE, file=out, flush=True)
    except KeyboardInterrupt:
        _tell_left(follower.snapshot, out)
        return True
    finally:
        follower.close()
    return False


def show_screen(path: str, until: Until = never, interrupt_stops: bool = False, console: Console | None = None,
                look: Look | None = None) -> None:
    """Draw until a key leaves or ``until`` says so; raises CannotConnect where there is no daemon at the start."""
    look = look or Look()
    follower, stopper = Follower(path, RATE_HZ), Stopper(path)
    sys.setswitchinterval(SWITCH_S)
    follower.open(time.monotonic())
    _first(follower)
    stopper.prepare()
    acts = Acts(stopper, interrupt_stops, time.monotonic)
    drawn = console or Console(no_color=not look.colour or None)
    try:
        live = Live(console=drawn, screen=True, auto_refresh=False, redirect_stdout=False, redirect_stderr=False)
        with live, KeyReader(acts.act, time.monotonic) as keys:
            Drawing(live, follower, stopper, acts, keys, look).until_left(until)
    except KeyboardInterrupt:
        pass  # a signal from outside: leaves, as the key does
    finally:
        follower.close()
        stopper.close()
    _tell_left(follower.snapshot, sys.stdout)


class Drawing:
    """The loop that draws: what its keys have chosen, and the bell."""

    def __init__(self, live: Live, follower: Follower, stopper: Stopper, acts: Acts, keys: KeyReader,
                 look: Look) -> None:
        self._live, self._follower, self._stopper, self._acts, self._keys = live, follower, stopper, acts, keys
        self._page = bench_display if look.bench_display else screen
        self._plotted, self._bell = look.plotted, Bell(look.bell)
        self._ascii_only = needs_ascii(live.console) if look.ascii_only is None else look.ascii_only

    def until_left(self, until: Until) -> None:
        """Draw each change, and five times a second without one, until a key leaves or ``until`` says so."""
        while True:
            now_s = time.monotonic()
            self._follower.wait_change(now_s, REDRAW_S)
            if not self._follower.connected:
                time.sleep(REDRAW_S)
            snapshot = self._follower.snapshot
            if snapshot is None:
                continue
            view = self.view(time.monotonic())
            for act in self._acts.taken():
                if act in (Act.LEAVE, Act.INTERRUPT):
                    return
                self.take(act, snapshot, view)
            self.draw(snapshot, time.monotonic())
            if until(snapshot):
                return

    def take(self, act: Act, snapshot: Snapshot, view: View) -> None:
        """Carry out a key that changes how it looks or sounds."""
        if act is Act.BELL:
            self._bell.switch()
        elif act is Act.PLOT:
            self._plotted = plots.after(snapshot, view)

    def view(self, now_s: float) -> View:
        """Return how this process sees the snapshot now."""
        return View(since_s=max(0.0, now_s - self._follower.came_s), period_s=1.0 / RATE_HZ,
                    can_stop=self._keys.reads, connected=self._follower.connected, note=self._stopper.note(now_s),
                    plotted=self._plotted, bell=self._bell.enabled, ascii_only=self._ascii_only)

    def draw(self, snapshot: Snapshot, now_s: float) -> None:
        """Draw and ring."""
        view, console = self.view(now_s), self._live.console
        width, height = console.size
        self._live.update(Group(*self._page(snapshot, view, width, height)), refresh=True)
        if self._bell.rings(snapshot, view, now_s):
            console.bell()


def needs_ascii(console: Console) -> bool:
    """Whether the terminal cannot draw more than ASCII: another encoding, or a console without braille."""
    return not console.encoding.lower().startswith("utf") or os.environ.get("TERM", "") in ("linux", "vt100", "vt220")


def _first(follower: Follower) -> Snapshot:
    until_s = time.monotonic() + FIRST_S
    while follower.snapshot is None and follower.connected and time.monotonic() < until_s:
        follower.wait_change(time.monotonic(), REDRAW_S)
    if follower.snapshot is None:
        raise CannotConnect("a first snapshot from the daemon", "none", "", "see whether the daemon still runs")
    return follower.snapshot


def _tell_left(snapshot: Snapshot | None, out: TextIO) -> None:
    """Say that what runs goes on without the view."""
    if snapshot is not None and snapshot.permission in ENERGISED:
        print("left the view; what runs goes on: 'hvhost lower' or 'hvhost cut' stops it", file=out)
