"""Following a daemon's snapshots from another process: subscription, changes put together, reconnection.

Times are the caller's monotonic seconds, so that a test needs no waiting.
"""

from collections.abc import Callable
from typing import Any

from hvhost.publish.client import Client
from hvhost.publish.snapshot import Snapshot
from hvhost.words.errors import CannotConnect, HvhostError

RETRY_S = 1.0


class Follower:
    """Keeps the newest snapshot of one bench; ``connected`` says whether its daemon is there."""

    def __init__(self, path: str, rate_hz: float, connect: Callable[[str], Client] = Client.connect) -> None:
        self._path, self._rate_hz, self._connect = path, rate_hz, connect
        self._client: Client | None = None
        self._fields: dict[str, Any] = {}
        self._tried_s = float("-inf")
        self.snapshot: Snapshot | None = None
        self.came_s = float("-inf")
        self.dropped = 0

    @property
    def connected(self) -> bool:
        """Whether the daemon is there."""
        return self._client is not None

    def open(self, now_s: float) -> None:
        """Connect and subscribe; raises CannotConnect."""
        self._tried_s = now_s
        client = self._connect(self._path)
        try:
            client.call("subscribe", {"rate_hz": self._rate_hz}, timeout_s=2.0)
        except HvhostError as fault:
            client.close()
            raise CannotConnect("snapshots from the daemon", str(fault), self._path,
                                "close another view, or see whether the daemon still runs") from None
        self._client = client

    def close(self) -> None:
        """End the connection."""
        if self._client is not None:
            self._client.close()
            self._client = None

    def wait_change(self, now_s: float, timeout_s: float) -> bool:
        """Take what comes within ``timeout_s``; return whether there is a newer snapshot.

        A daemon that is gone is tried again once a second; nothing is raised for it.
        """
        if self._client is None:
            self._retry(now_s)
            return False
        try:
            message = self._client.notification(timeout_s)
            changed = False
            while message is not None:
                changed |= self._take(message)
                message = self._client.notification(0.0)
        except HvhostError:
            self.close()
            return False
        if changed:
            self.snapshot = Snapshot.from_json(self._fields)
            self.came_s = now_s
        return changed

    def _retry(self, now_s: float) -> None:
        if now_s - self._tried_s < RETRY_S:
            return
        try:
            self.open(now_s)
        except CannotConnect:
            self._client = None

    def _take(self, message: dict[str, Any]) -> bool:
        params = message.get("params")
        if message.get("method") != "snapshot" or not isinstance(params, dict):
            return False
        fields = params.get("fields")
        if not isinstance(fields, dict):
            return False
        self._fields = fields if params.get("whole") else {**self._fields, **fields}
        self.dropped = params.get("dropped", 0)
        return True
