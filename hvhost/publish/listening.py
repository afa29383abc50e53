"""Making the socket file of one bench: private to its owner, one daemon at a time, stale files removed.

A lock file beside the socket decides who serves, so that two daemons that start at once cannot both find the other's
socket stale.  Nothing but a socket is ever removed.
"""

import fcntl
import os
import socket
import stat
from types import TracebackType
from typing import Self

from hvhost.words.errors import CannotConnect

BACKLOG = 32  # below the room for stops-only clients, so that one turn of accepting never pushes out a fresh one


class ListeningSocket:
    """A bound, listening, non-blocking Unix socket with mode 0600; ``close`` removes its file."""

    def __init__(self, path: str) -> None:
        self.path = path
        _make_folder(os.path.dirname(path) or ".")
        self._lock = _take_lock(path)
        try:
            _clear_place(path)
            self.socket = _bind(path)
        except BaseException:
            os.close(self._lock)
            raise
        self._inode = os.stat(path).st_ino

    def __enter__(self) -> Self:
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None,
                 trace: TracebackType | None) -> None:
        self.close()

    def close(self) -> None:
        """Close the socket and remove its file and lock, where the file is still ours; a second call does nothing."""
        if self._lock < 0:
            return
        self.socket.close()
        for path, ours in ((self.path, self._inode), (self.path + ".lock", None)):
            try:
                if ours is None or os.stat(path).st_ino == ours:
                    os.unlink(path)
            except OSError:
                pass  # somebody else removed it: nothing of ours is left there
        os.close(self._lock)
        self._lock = -1


def _make_folder(folder: str) -> None:
    try:
        os.makedirs(folder, mode=0o700, exist_ok=True)
    except OSError as fault:
        raise CannotConnect("a folder for the control socket", fault.strerror or str(fault), folder,
                            "make it writable or give another place with --socket") from None


def _take_lock(path: str) -> int:
    """Return the descriptor of the held lock; a lock file that was removed meanwhile is taken anew."""
    lock_path = path + ".lock"
    while True:
        try:
            lock = os.open(lock_path, os.O_RDWR | os.O_CREAT | os.O_CLOEXEC | os.O_NOFOLLOW, 0o600)
        except OSError as fault:
            raise CannotConnect("a lock file beside the control socket", fault.strerror or str(fault), lock_path,
                                "make the folder writable or give another place with --socket") from None
        try:
            fcntl.flock(lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except OSError:
            os.close(lock)
            raise CannotConnect("no other daemon on this bench", "one that is running", path,
                                "use it ('hvhost status'), or end it first") from None
        if _same_file(lock, lock_path):
            return lock
        os.close(lock)


def _same_file(descriptor: int, path: str) -> bool:
    try:
        return os.fstat(descriptor).st_ino == os.stat(path).st_ino
    except OSError:
        return False


def _clear_place(path: str) -> None:
    """Remove a socket that nobody answers on; refuse anything else."""
    try:
        mode = os.lstat(path).st_mode
    except FileNotFoundError:
        return
    if not stat.S_ISSOCK(mode):
        raise CannotConnect("a free place or an old socket", "a file of another kind", path,
                            "move it away or give another place with --socket")
    with socket.socket(socket.AF_UNIX, socket.SOCK_STREAM) as probe:
        probe.settimeout(0.5)
        try:
            probe.connect(path)
        except ConnectionRefusedError:
            os.unlink(path)
            return
        except OSError as fault:
            raise CannotConnect("a stale socket or none", fault.strerror or str(fault), path,
                                "end the daemon that made it") from None
    raise CannotConnect("no other daemon on this bench", "one that answers", path,
                        "use it ('hvhost status'), or end it first")


def _bind(path: str) -> socket.socket:
    made = socket.socket(socket.AF_UNIX, socket.SOCK_STREAM | socket.SOCK_NONBLOCK)
    before = os.umask(0o177)
    try:
        made.bind(path)
        made.listen(BACKLOG)
    except OSError as fault:
        made.close()
        raise CannotConnect("a socket file that can be made", fault.strerror or str(fault), path,
                            "give another place with --socket") from None
    finally:
        os.umask(before)
    return made
