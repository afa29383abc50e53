"""What a stop key does: its own connection, sent at once from the thread that reads keys.

The connection is made before it is needed.  Sending never waits for an answer, so that a cut can follow a lower
within the same breath; answers are read by whoever draws.
"""

import threading

from hvhost.publish.client import Client
from hvhost.words.errors import CannotConnect, HvhostError

NOTE_S = 6.0  # how long the outcome of a key stands in place of what may be done next
SEND_S = 1.0
ANSWER_S = 1.0  # a daemon that has not answered a stop by now is stalled or gone


class Stopper:
    """Sends ``lower`` and ``cut`` for one bench; ``note(now_s)`` is what the last key led to."""

    def __init__(self, path: str) -> None:
        self._path = path
        self._lock = threading.Lock()
        self._client: Client | None = None
        self._verbs: dict[int, tuple[str, float]] = {}  # id -> verb, when it was sent
        self._note, self._noted_s = "", float("-inf")

    def prepare(self) -> None:
        """Connect ahead of need; a failure is told when a key is pressed."""
        with self._lock:
            try:
                self._connected()
            except CannotConnect:
                self._drop()

    def press(self, verb: str, now_s: float) -> None:
        """Send the stop now, on a fresh connection where the old one is dead."""
        with self._lock:
            for last in (False, True):
                try:
                    self._verbs[self._connected().send(verb)] = (verb, now_s)
                except CannotConnect as fault:
                    self._drop()
                    if last:
                        self._say(f"{verb.upper()} NOT SENT, no daemon answers ({fault.found}): "
                                  "use the emergency switching off", now_s)
                else:
                    self._say(f"{verb} sent by this key, not answered yet", now_s)
                    return

    def note(self, now_s: float) -> str:
        """Return what the last key led to, '' when it is old; takes the answers that have come."""
        with self._lock:
            self._take_answers(now_s)
            return self._note if now_s - self._noted_s < NOTE_S else ""

    def close(self) -> None:
        """End the connection."""
        with self._lock:
            self._drop()

    def _connected(self) -> Client:
        if self._client is None:
            self._client = Client.connect(self._path, SEND_S)
        return self._client

    def _take_answers(self, now_s: float) -> None:
        if self._client is None:
            return
        try:
            while (message := self._client.notification(0.0)) is not None:
                verb, _ = self._verbs.pop(message.get("id", -1), ("", 0.0))
                if verb:
                    self._say(f"{verb} sent by this key: {_answer_words(message)}", now_s)
        except HvhostError:
            self._unanswered(now_s)
        if any(now_s - sent_s > ANSWER_S for _, sent_s in self._verbs.values()):
            self._unanswered(now_s)

    def _unanswered(self, now_s: float) -> None:
        """Give the connection up, and say which stops nobody answered."""
        waiting = sorted({verb for verb, _ in self._verbs.values()})
        self._drop()
        if waiting:
            self._say(f"{' and '.join(waiting)} sent by this key, NOT ANSWERED: use the emergency switching off", now_s)

    def _drop(self) -> None:
        if self._client is not None:
            self._client.close()
        self._client = None
        self._verbs.clear()

    def _say(self, note: str, now_s: float) -> None:
        self._note, self._noted_s = note, now_s


def _answer_words(message: dict[str, object]) -> str:
    error, result = message.get("error"), message.get("result")
    if isinstance(error, dict):
        return f"refused: {error.get('message', '')}"
    if isinstance(result, dict) and result.get("text"):
        return str(result["text"])
    number = result.get("number") if isinstance(result, dict) else None
    return f"taken by the daemon as number {number}" if number else "taken by the daemon"
