"""A command in a terminal of its own, as a person has it: keys go in, the screen is read as text."""

import fcntl
import os
import struct
import subprocess
import sys
import termios
import threading
from pathlib import Path

import pyte


class Terminal:
    """``hvhost ARGUMENTS`` on a pseudo-terminal; ``reading = False`` stops taking its output."""

    def __init__(self, *arguments: str, columns: int = 80, rows: int = 24, cwd: Path | None = None) -> None:
        self.master, slave = os.openpty()
        fcntl.ioctl(slave, termios.TIOCSWINSZ, struct.pack("HHHH", rows, columns, 0, 0))
        self.reading = True
        self._screen = pyte.Screen(columns, rows)
        self._stream = pyte.ByteStream(self._screen)
        self._lock = threading.Lock()
        self.process = subprocess.Popen(
            [sys.executable, "-m", "hvhost", *arguments], stdin=slave, stdout=slave, stderr=slave, cwd=cwd,
            start_new_session=True, env={**os.environ, "TERM": "xterm-256color", "COLUMNS": str(columns),
                                         "LINES": str(rows)},
            preexec_fn=_own_terminal)
        os.close(slave)
        os.set_blocking(self.master, False)
        self._ending = threading.Event()
        self._thread = threading.Thread(target=self._read, daemon=True)
        self._thread.start()

    def __enter__(self) -> "Terminal":
        return self

    def __exit__(self, *_: object) -> None:
        if self.process.poll() is None:
            self.process.kill()
        self.process.wait()
        self._ending.set()
        self._thread.join(10.0)
        os.close(self.master)

    def _read(self) -> None:
        while not self._ending.wait(0.01):
            try:
                data = os.read(self.master, 65536) if self.reading else b""
            except OSError:  # nothing now, or the process has ended
                continue
            with self._lock:
                self._stream.feed(data)

    def type(self, keys: str) -> None:
        """Press keys."""
        os.write(self.master, keys.encode())

    @property
    def text(self) -> str:
        """The screen's lines."""
        with self._lock:
            return "\n".join(self._screen.display)


def _own_terminal() -> None:
    fcntl.ioctl(0, termios.TIOCSCTTY, 0)
