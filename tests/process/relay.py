"""A relay between stand-in and daemon, as a cable that can be pulled, delayed, or lied through.

The board's side stays open, as a UART's does; the host's side is a pseudo-terminal behind a symbolic link, or a TCP
port, that `unplug` closes and `plug` opens again.
"""

import contextlib
import os
import select
import socket
import threading
import time
import tty
from collections import deque
from collections.abc import Callable
from pathlib import Path
from zlib import crc32

KEEP = 1 << 20
Rewrite = Callable[[bytes], bytes]


def sealed(body: bytes) -> bytes:
    """A whole line for a body, by PROTOCOL.md clause 2.1, written out here once more."""
    return b"%b*%03X%08X\n" % (body, len(body), crc32(body))


class Relay:
    """Moves bytes in a thread of its own; ``delay_s`` holds host-bound bytes back, ``rewrite`` changes whole lines."""

    def __init__(self, board: str) -> None:
        self.delay_s: Callable[[], float] = lambda: 0.0
        self.rewrite: Rewrite | None = None
        self.to_board = bytearray()  # what the host sent, for a look
        self._board, self._board_end = _open_board(board)
        self._host = -1
        self._late: deque[tuple[float, bytes]] = deque()
        self._rest = b""
        self._lock = threading.RLock()
        self._ending = False
        self._thread = threading.Thread(target=self._run, name="relay", daemon=True)

    def __enter__(self) -> "Relay":
        self.plug()
        self._thread.start()
        return self

    def __exit__(self, *_: object) -> None:
        self._ending = True
        self._thread.join(10.0)
        with self._lock:
            self._close()
            self._board_end()

    @property
    def device(self) -> str:
        """What the daemon opens."""
        raise NotImplementedError

    def plug(self) -> None:
        """Open the host's side."""
        raise NotImplementedError

    def unplug(self) -> None:
        """Close the host's side: what is on its way is lost."""
        with self._lock:
            self._close()
            self._late.clear()
            self._rest = b""

    def _close(self) -> None:
        raise NotImplementedError

    def _arrive(self) -> None:
        """Look whether a host came (TCP only)."""

    def _run(self) -> None:
        while not self._ending:
            with self._lock:
                self._arrive()
                self._move()
            time.sleep(0.001)

    def _move(self) -> None:
        if data := _read(self._board):
            self._take(data)
        now_s = time.monotonic()
        while self._late and self._late[0][0] <= now_s:
            _write(self._host, self._late.popleft()[1])
        if data := _read(self._host):
            self.to_board += data
            del self.to_board[:-KEEP]
            _write(self._board, data)

    def _take(self, data: bytes) -> None:
        due_s = time.monotonic() + self.delay_s()
        if self.rewrite is None:
            self._late.append((due_s, self._rest + data))
            self._rest = b""
            return
        *lines, self._rest = (self._rest + data).split(b"\n")
        for line in lines:
            body = line[:-12]
            changed = self.rewrite(body)
            self._late.append((due_s, line + b"\n" if changed is body else sealed(changed)))


class PtyRelay(Relay):
    """The host's side is a pseudo-terminal behind a link whose name stays."""

    def __init__(self, board: str, link: Path) -> None:
        super().__init__(board)
        self._link = link

    @property
    def device(self) -> str:
        return str(self._link)

    def plug(self) -> None:
        with self._lock:
            master, slave = os.openpty()
            tty.setraw(slave)
            beside = self._link.with_name(self._link.name + ".new")
            beside.symlink_to(os.ttyname(slave))
            os.close(slave)
            os.set_blocking(master, False)
            self._host = master
            os.replace(beside, self._link)

    def _close(self) -> None:
        if self._host >= 0:
            os.close(self._host)
            self._host = -1
        self._link.unlink(missing_ok=True)


class TcpRelay(Relay):
    """The host's side is a TCP port that stays the same."""

    def __init__(self, board: str) -> None:
        super().__init__(board)
        self._listener: socket.socket | None = None
        self._peer: socket.socket | None = None
        self._port = 0

    @property
    def device(self) -> str:
        return f"tcp:127.0.0.1:{self._port}"

    def plug(self) -> None:
        with self._lock:
            listener = socket.socket()
            listener.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
            listener.bind(("127.0.0.1", self._port))
            listener.listen()
            listener.setblocking(False)
            self._port = listener.getsockname()[1]
            self._listener = listener

    def _arrive(self) -> None:
        if self._listener is None:
            return
        with contextlib.suppress(BlockingIOError):
            peer, _ = self._listener.accept()
            if self._peer is not None:
                self._peer.close()
            peer.setblocking(False)
            peer.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
            self._peer, self._host = peer, peer.fileno()

    def _close(self) -> None:
        self._host = -1
        for one in (self._peer, self._listener):
            if one is not None:
                one.close()
        self._peer = self._listener = None


def _open_board(device: str) -> tuple[int, Callable[[], None]]:
    if device.startswith("tcp:"):
        host, _, port = device[4:].rpartition(":")
        link = socket.create_connection((host, int(port)))
        link.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        link.setblocking(False)
        return link.fileno(), link.close
    descriptor = os.open(device, os.O_RDWR | os.O_NOCTTY | os.O_NONBLOCK)
    return descriptor, lambda: os.close(descriptor)


def _read(descriptor: int) -> bytes:
    """What is there now; nothing where nobody is."""
    if descriptor < 0:
        return b""
    try:
        return os.read(descriptor, 65536)
    except OSError:  # nothing now, or the other side is not open
        return b""


def _write(descriptor: int, data: bytes) -> None:
    """Write, waiting a little where the other side does not read; what it never takes is lost."""
    until_s = time.monotonic() + 1.0
    while descriptor >= 0 and data and time.monotonic() < until_s:
        try:
            data = data[os.write(descriptor, data) :]
        except BlockingIOError:
            select.select([], [descriptor], [], 0.05)
        except OSError:
            return
