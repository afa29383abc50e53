"""The screen's process: follows the snapshots, draws, and lets keys stop.

A terminal that stops taking output blocks this process and no other; its keys are read by a thread with a
connection of its own, so that they stop then too.
"""

import sys
import time
from collections.abc import Callable
from queue import Empty, SimpleQueue
from typing import TextIO

from rich.console import Console, Group
from rich.live import Live

from hvhost.publish.following import Follower
from hvhost.publish.keys import Act, KeyReader
from hvhost.publish.plain import CANNOT_STOP, PlainFollower, status_lines
from hvhost.publish.snapshot import Snapshot
from hvhost.publish.stopkeys import Stopper
from hvhost.publish.view import screen
from hvhost.publish.wording import ENERGISED, View
from hvhost.words.errors import CannotConnect

RATE_HZ = 10.0
REDRAW_S = 0.2  # countdowns and ages move without a new snapshot
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

    def leaves(self) -> bool:
        """Whether a key asked to leave."""
        try:
            self._waiting.get_nowait()
        except Empty:
            return False
        return True


def show_once(path: str, out: TextIO) -> None:
    """Print the present status in lines; raises CannotConnect."""
    follower = Follower(path, RATE_HZ)
    follower.open(time.monotonic())
    try:
        snapshot = _first(follower)
        print("\n".join(status_lines(snapshot, View(can_stop=False))), file=out)
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


def show_screen(path: str, until: Until = never, interrupt_stops: bool = False, console: Console | None = None) -> None:
    """Draw until a key leaves or ``until`` says so; raises CannotConnect where there is no daemon at the start."""
    follower, stopper = Follower(path, RATE_HZ), Stopper(path)
    follower.open(time.monotonic())
    _first(follower)
    stopper.prepare()
    acts = Acts(stopper, interrupt_stops, time.monotonic)
    drawn = console or Console()
    try:
        live = Live(console=drawn, screen=True, auto_refresh=False, redirect_stdout=False, redirect_stderr=False)
        with live, KeyReader(acts.act, time.monotonic) as keys:
            _draw_until_left(live, follower, stopper, acts, keys, until)
    except KeyboardInterrupt:
        pass  # a signal from outside: leaves, as the key does
    finally:
        follower.close()
        stopper.close()
    _tell_left(follower.snapshot, sys.stdout)


def _draw_until_left(live: Live, follower: Follower, stopper: Stopper, acts: Acts, keys: KeyReader,
                     until: Until) -> None:
    while not acts.leaves():
        now_s = time.monotonic()
        follower.wait_change(now_s, REDRAW_S)
        if not follower.connected:
            time.sleep(REDRAW_S)
        snapshot = follower.snapshot
        if snapshot is None:
            continue
        now_s = time.monotonic()
        view = View(since_s=max(0.0, now_s - follower.came_s), period_s=1.0 / RATE_HZ, can_stop=keys.reads,
                    connected=follower.connected, note=stopper.note(now_s))
        width, height = live.console.size
        live.update(Group(*screen(snapshot, view, width, height)), refresh=True)
        if until(snapshot):
            return


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
