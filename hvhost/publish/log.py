"""The daemon's log: lines for a terminal, a journal or a collector, bounded, and never a reason to wait.

A pipe that nobody reads, a terminal held with a key, a full disk under a redirected file: writing to any of them can
block for ever, and a loop that waits there judges nothing.  So a line is only put into a bounded queue; a thread of
its own writes, and is the only one that may hang.  What the queue cannot hold is dropped, oldest first, and counted,
and the next line that gets through says how many are missing (S12).

Three styles:

* *plain*: ``hvhost: text``.
* *journal*: ``<4>demo: text``: the level that a journal takes from the start of a line (sd-daemon(3)).
* *json*: one flat object a line: ``t`` (UTC nanoseconds), ``level``, ``bench``, ``text``, and where known ``run`` and
  ``n``, the number of the event, by which gaps are seen.  Where the stream leads to a journal the level stands before
  it all the same.

A line is one line and of bounded length: characters that are not printable are written as escapes, so that nothing
that came from outside can forge an entry.  Nothing secret is ever handed to a log: callers are given texts that
screens and records hold too.
"""

import json
import os
import select
import threading
import time
from collections import deque
from collections.abc import Callable, Mapping
from enum import StrEnum

LINES_MAX = 512
TEXT_MAX = 2000  # characters of one line
FLUSH_S = 0.5  # how long the end waits for what is queued
JOURNAL = "JOURNAL_STREAM"

# levels of sd-daemon(3), which are those of syslog(3)
LEVELS: dict[str, int] = {"trip": 2, "attention": 4, "notice": 5, "note": 6}


class Style(StrEnum):
    """How lines are written; see the module's text."""

    PLAIN = "plain"
    JOURNAL = "journal"
    JSON = "json"


class Log:
    """Writes lines to one descriptor from a thread of its own; calling it says a notice."""

    def __init__(self, fd: int = 2, style: Style = Style.PLAIN, *, bench: str = "", prefixed: bool = False,
                 utc_ns: Callable[[], int] = time.time_ns, lines_max: int = LINES_MAX) -> None:
        self.style, self.bench = style, bench
        self._fd, self._utc_ns = fd, utc_ns
        self._prefixed = prefixed or style is Style.JOURNAL
        self._lines: deque[bytes] = deque()
        self._lines_max = lines_max
        self._crowded_out = 0  # the caller's count
        self._unwritten = 0  # the thread's
        self._told = 0
        self._wake, self._idle = threading.Event(), threading.Event()
        self._idle.set()
        self._thread: threading.Thread | None = None

    def __call__(self, text: str) -> None:
        """Say one line of the daemon itself."""
        self.write("notice", text)

    def write(self, level: str, text: str, **fields: object) -> None:
        """Queue one line; never waits, never raises."""
        lines = self._lines
        if len(lines) >= self._lines_max:
            lines.popleft()
            self._crowded_out += 1
        lines.append(self._line(level, text, fields))
        self._idle.clear()
        if self._thread is None:
            self._thread = threading.Thread(target=self._run, name="log", daemon=True)
            self._thread.start()
        self._wake.set()

    def close(self, wait_s: float = FLUSH_S) -> None:
        """Wait a little for what is queued; what a reader does not take by then is lost with the process."""
        self._idle.wait(wait_s)

    @property
    def dropped(self) -> int:
        """Lines that nobody will read."""
        return self._crowded_out + self._unwritten

    def _line(self, level: str, text: str, fields: Mapping[str, object]) -> bytes:
        text = printable(text)
        head = f"<{LEVELS.get(level, 5)}>" if self._prefixed else ""
        if self.style is Style.JSON:
            body = json.dumps({"t": self._utc_ns(), "level": level, "bench": self.bench, "text": text, **fields},
                              allow_nan=False, default=str)
        else:
            body = f"{self.bench or 'hvhost'}: {text}" if self._prefixed else f"hvhost: {text}"
        return f"{head}{body}\n".encode("utf-8", "backslashreplace")

    # ------------------------------------------------------------ the thread's side

    def _run(self) -> None:
        while True:
            self._wake.wait()
            self._wake.clear()
            while self._lines:
                try:
                    line = self._lines.popleft()
                except IndexError:  # the other side dropped it meanwhile
                    break
                self._own_up()
                if not self._written(line):
                    self._unwritten += 1
            self._idle.set()

    def _own_up(self) -> None:
        """Say before the next line how many are missing; not through the queue, which could drop the saying too."""
        missing = self.dropped - self._told
        if missing and self._written(self._line(
                "attention", f"{missing} lines of the log were dropped: nobody read them", {})):
            self._told += missing

    def _written(self, line: bytes) -> bool:
        """Write a whole line, waiting for the reader as long as it takes; False where there is no reader any more."""
        while line:
            try:
                line = line[os.write(self._fd, line):]
            except BlockingIOError:  # somebody made the stream non-blocking
                select.select([], [self._fd], [])
            except OSError:
                return False
        return True


class Silent(Log):
    """A log of which nobody wants to know anything."""

    def write(self, level: str, text: str, **fields: object) -> None:
        """Say nothing."""


def printable(text: str) -> str:
    """The text on one line, cut at a bound, with what is not printable escaped."""
    cut = text if len(text) <= TEXT_MAX else text[: TEXT_MAX - 3] + "..."
    if cut.isprintable():
        return cut
    return "".join(one if one.isprintable() else one.encode("unicode_escape").decode("ascii") for one in cut)


def leads_to_journal(fd: int, environ: Mapping[str, str] = os.environ) -> bool:
    """Whether this descriptor is the stream to a journal that the service manager named (systemd.exec(5))."""
    try:
        status = os.fstat(fd)
    except OSError:
        return False
    return environ.get(JOURNAL, "") == f"{status.st_dev}:{status.st_ino}"


def log_of(style: str, bench: str, fd: int = 2) -> Log:
    """The log for an option: 'auto' is the journal's style where the stream leads to one, else plain."""
    journal = leads_to_journal(fd)
    chosen = (Style.JOURNAL if journal else Style.PLAIN) if style == "auto" else Style(style)
    return Log(fd, chosen, bench=bench, prefixed=journal)
