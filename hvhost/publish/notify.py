"""Telling the service manager how the daemon is: readiness, stopping, status, and the watchdog's keep-alive.

The protocol is that of sd_notify(3): one datagram of ``KEY=value`` lines to the Unix socket named in the environment.
A manager that does not read must not hold the daemon, so the socket does not block and what it does not take is
counted and dropped (S12).  Readiness and stopping are said once, so these go out again with the next message.

What feeds the watchdog decides what it is worth.  A timer that feeds it proves only that timers run: a guard that
no longer judges would stay alive for ever behind it.  So there are two ways to feed it, and no third:

* *A fresh block was judged.*  The call stands in the read callback behind the protective chain, and only for a block
  that was taken, judged, and not older than the lease on arrival.  While anything is armed, warning, energised,
  pausing or lowering this is the only way: a loop that turns but no longer gets, takes or judges samples is as dead
  as one that is stuck, and is ended.
* *The loop turns and the bench is idle*: the permission is idle, which is what the MCU last reported, or what follows
  from a lost link by the second table.  Then the loop is all there is to prove.  A lost link counts as idle on
  purpose: nothing that this process could do would reach the bench, the MCU lowers by its own lease, and a restart
  would only take away the screens that say 'output unknown'.

What a watchdog's kill does is bounded by S4 and S8: the MCU loses the lease and lowers by itself, and the daemon that
is started again is passive.  So the time may be generous (the unit says 10 s): it ends what hangs, it protects nobody.
"""

import os
import socket
from collections.abc import MutableMapping

FEEDS = 4  # keep-alives in one watchdog time: two may be lost
STATUS_MAX = 200  # characters
SAID_ONCE = ("READY=", "STOPPING=")
ADDRESS, WATCHDOG_US, WATCHDOG_PID = "NOTIFY_SOCKET", "WATCHDOG_USEC", "WATCHDOG_PID"


class Notifier:
    """Sends to one manager; with an empty address it does nothing.  ``watchdog_s`` is None where none is asked for."""

    def __init__(self, address: str = "", watchdog_s: float | None = None) -> None:
        self.watchdog_s = watchdog_s if address else None
        self.dropped = 0
        self._owed: tuple[str, ...] = ()
        self._address = "\0" + address[1:] if address.startswith("@") else address  # an abstract name
        self._socket: socket.socket | None = None
        if address:
            self._socket = socket.socket(socket.AF_UNIX, socket.SOCK_DGRAM | socket.SOCK_NONBLOCK | socket.SOCK_CLOEXEC)

    @classmethod
    def taken_from(cls, environ: MutableMapping[str, str] = os.environ, pid: int | None = None) -> "Notifier":
        """Take what the manager wrote into the environment, out of it: children are not to speak for the daemon."""
        address, micros, meant = (environ.pop(key, "") for key in (ADDRESS, WATCHDOG_US, WATCHDOG_PID))
        for_us = meant in ("", str(os.getpid() if pid is None else pid))
        fit = for_us and micros.isascii() and micros.isdecimal() and int(micros) > 0
        return cls(address if address[:1] in ("/", "@") else "", int(micros) / 1e6 if fit else None)

    def send(self, *lines: str) -> bool:
        """Send these lines; False where nobody asked or the socket did not take them (counted)."""
        if self._socket is None:
            return False
        lines = (*self._owed, *lines)
        try:
            self._socket.sendto("\n".join(lines).encode(), self._address)
        except OSError:
            self.dropped += 1
            self._owed = tuple(line for line in lines if line.startswith(SAID_ONCE))
            return False
        self._owed = ()
        return True

    def ready(self, status: str) -> None:
        """The daemon serves."""
        self.send("READY=1", f"STATUS={one_line(status)}")

    def status(self, text: str) -> None:
        """What it does now."""
        self.send(f"STATUS={one_line(text)}")

    def stopping(self, status: str, for_s: float) -> None:
        """The daemon ends and needs at most so long."""
        self.send("STOPPING=1", f"STATUS={one_line(status)}", f"EXTEND_TIMEOUT_USEC={round(for_s * 1e6)}")

    def extend(self, for_s: float) -> None:
        """Ask for so many more seconds for what is under way."""
        self.send(f"EXTEND_TIMEOUT_USEC={round(for_s * 1e6)}")

    def close(self) -> None:
        """Let go of the socket."""
        if self._socket is not None:
            self._socket.close()
            self._socket = None


class Watchdog:
    """Feeds the manager's watchdog, by the two ways of the module's text and no more often than needed."""

    def __init__(self, notifier: Notifier) -> None:
        self._notifier = notifier
        self.every_s = notifier.watchdog_s / FEEDS if notifier.watchdog_s else None
        self._fed_s = float("-inf")
        self.fed = 0

    def judged(self, now_s: float) -> None:
        """The protective chain judged a fresh block."""
        if self.every_s is not None and now_s - self._fed_s >= self.every_s:
            self._feed(now_s)

    def turned(self, now_s: float, *, idle: bool) -> None:
        """The loop turned; that counts only while the bench is idle."""
        if idle:
            self.judged(now_s)

    def _feed(self, now_s: float) -> None:
        if self._notifier.send("WATCHDOG=1"):
            self._fed_s = now_s
            self.fed += 1


def one_line(text: str) -> str:
    """A status without line ends, which would begin another key."""
    return " ".join(text.split())[:STATUS_MAX]
