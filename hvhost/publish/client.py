"""The way in for commands and screens: a plain, synchronous client of the local control socket.

Only ``socket`` and ``json`` are imported, so that a stop is on the wire soon after the shell has started it.

>>> with Client.connect("/run/user/1000/hvhost/demo.sock") as bench:      # doctest: +SKIP
...     bench.call("status")
"""

import json
import os
import select
import socket

from hvhost.words.errors import CannotConnect, CommandRefused, FileFault, HvhostError, RecordFault, UsageFault

TYPE_CHECKING = False
if TYPE_CHECKING:
    from types import TracebackType
    from typing import Any, Self

ANSWER_LIMIT = 16_777_216  # bytes of one line from the daemon
CONNECT_S = 2.0
ANSWER_S = 10.0
NOTIFICATIONS_KEPT = 64
_KINDS: "dict[str, type[HvhostError]]" = {
    kind.__name__: kind for kind in (CannotConnect, CommandRefused, RecordFault, UsageFault)
}
_GONE = "see whether the daemon still runs; if in doubt use the emergency switching off"


class Client:
    """One connection.  ``call`` waits for its answer; notifications that come meanwhile are kept, oldest dropped."""

    def __init__(self, connected: socket.socket, path: str) -> None:
        self._socket, self.path = connected, path
        self._buffer = bytearray()
        self._searched = 0
        self._next_id = 1
        self._notifications: list[dict[str, Any]] = []

    @classmethod
    def connect(cls, path: str, timeout_s: float = CONNECT_S) -> "Self":
        """Connect to the socket at ``path``; raises CannotConnect with a remedy."""
        made = socket.socket(socket.AF_UNIX, socket.SOCK_STREAM)
        made.settimeout(timeout_s)
        try:
            made.connect(path)
        except OSError as fault:
            made.close()
            raise CannotConnect("a running daemon", _why(fault), path, _remedy(fault)) from None
        return cls(made, path)

    def __enter__(self) -> "Self":
        return self

    def __exit__(self, kind: "type[BaseException] | None", error: "BaseException | None",
                 trace: "TracebackType | None") -> None:
        self.close()

    def close(self) -> None:
        """End the connection; a seat that it holds is free then."""
        self._socket.close()

    def fileno(self) -> int:
        """Descriptor to wait on for notifications."""
        return self._socket.fileno()

    def send(self, method: str, params: "dict[str, Any] | None" = None) -> int:
        """Send a request and return its id without waiting; begins with LF, so that no torn line swallows it."""
        request_id = self._next_id
        self._next_id += 1
        line = json.dumps({"jsonrpc": "2.0", "id": request_id, "method": method, "params": params or {}})
        try:
            self._socket.sendall(b"\n" + line.encode("ascii") + b"\n")
        except OSError as fault:
            raise CannotConnect("a connected daemon", _why(fault), self.path, _GONE) from None
        return request_id

    def call(self, method: str, params: "dict[str, Any] | None" = None, timeout_s: float = ANSWER_S) -> "Any":
        """Send a request and return its result.

        Raises the error that the daemon answered (CommandRefused, FileFault, ...) or CannotConnect where it is gone
        or does not answer in time.
        """
        request_id = self.send(method, params)
        self._socket.settimeout(timeout_s)
        while True:
            message = self._next_line()
            if "method" in message:
                self._keep(message)
            elif message.get("id") == request_id:
                return result_of(message)
            elif message.get("id") is None and "error" in message:
                raise _error(message["error"])

    def notification(self, timeout_s: float = 0.0) -> "dict[str, Any] | None":
        """Return the oldest notification or answer not yet taken, None where none comes within ``timeout_s``.

        Raises CannotConnect where the daemon is gone.
        """
        if self._notifications:
            return self._notifications.pop(0)
        if not self._has_line() and not self._wait(timeout_s):
            return None
        self._socket.settimeout(max(timeout_s, 0.001))
        try:
            return self._next_line(only_waiting=True)
        except TimeoutError:
            return None

    def _wait(self, timeout_s: float) -> bool:
        ready, _, _ = select.select([self._socket], [], [], timeout_s)
        return bool(ready)

    def _has_line(self) -> bool:
        return self._buffer.find(b"\n", self._searched) >= 0

    def _next_line(self, only_waiting: bool = False) -> "dict[str, Any]":
        while (end := self._buffer.find(b"\n", self._searched)) < 0:
            self._searched = len(self._buffer)
            self._read(only_waiting)
        line = bytes(self._buffer[:end])
        del self._buffer[: end + 1]
        self._searched = 0
        try:
            message = json.loads(line)
        except ValueError:
            message = None
        if not isinstance(message, dict):
            raise CannotConnect("JSON-RPC from the daemon", repr(line[:60]), self.path, "is it a daemon of ours?")
        return message

    def _read(self, only_waiting: bool) -> None:
        try:
            data = self._socket.recv(262_144)
        except TimeoutError:
            if only_waiting:
                raise
            raise CannotConnect("an answer in time", "none", self.path, _GONE) from None
        except OSError as fault:
            raise CannotConnect("a connected daemon", _why(fault), self.path, _GONE) from None
        if not data or len(self._buffer) > ANSWER_LIMIT:
            found = "it closed the connection" if not data else "a line without end"
            raise CannotConnect("a connected daemon", found, self.path, _GONE)
        self._buffer += data

    def _keep(self, message: "dict[str, Any]") -> None:
        self._notifications.append(message)
        del self._notifications[:-NOTIFICATIONS_KEPT]


def result_of(message: "dict[str, Any]") -> "Any":
    """Return the result that an answer carries, or raise its error."""
    if "error" in message:
        raise _error(message["error"])
    return message.get("result")


def _error(error: "dict[str, Any]") -> HvhostError:
    """Return the error that an answer carries, as the class that was raised in the daemon."""
    data = error.get("data")
    message = str(error.get("message", "no reason given"))
    if not isinstance(data, dict) or "kind" not in data:
        return CommandRefused(message)
    expected, found, where, remedy = (str(data.get(name, "")) for name in ("expected", "found", "where", "remedy"))
    if data["kind"] == "FileFault":
        return FileFault(expected, found, where, remedy, tuple(data.get("findings", ())))
    return _KINDS.get(str(data["kind"]), CommandRefused)(expected, found, where, remedy)


def _why(fault: OSError) -> str:
    if isinstance(fault, TimeoutError):
        return "no answer in time"
    if isinstance(fault, FileNotFoundError | ConnectionRefusedError):
        return "none"
    return os.strerror(fault.errno) if fault.errno else str(fault)


def _remedy(fault: OSError) -> str:
    if isinstance(fault, PermissionError):
        return "run as the user who started the daemon"
    if isinstance(fault, TimeoutError):
        return _GONE
    return "start one with 'hvhost serve BENCH', or name its socket with --socket"
