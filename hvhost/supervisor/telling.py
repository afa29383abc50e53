"""What the core tells: lines for people, notes for the record, answers for whoever asked."""

from collections import deque
from dataclasses import dataclass
from typing import Any

from hvhost.supervisor.journal import Journal, NoJournal
from hvhost.wire.frames import McuEvent, encode_answer

LOG_KEPT = 200
REPLIES_KEPT = 64


@dataclass(frozen=True, slots=True)
class LogLine:
    """One line for people: number, host monotonic time, how loud ('note', 'attention', 'trip'), text."""

    number: int
    now_s: float
    severity: str
    text: str


class Teller:
    """The core's voice; everything kept here is bounded."""

    def __init__(self) -> None:
        self.journal: Journal = NoJournal()
        self.log: deque[LogLine] = deque(maxlen=LOG_KEPT)
        self.replies: dict[int, str] = {}
        self._log_number = 0

    def say(self, now_s: float, severity: str, text: str) -> None:
        """Add a line for people, and keep it in the record."""
        self._log_number += 1
        self.log.append(LogLine(self._log_number, now_s, severity, text))
        self.note(now_s, "event", severity=severity, text=text)

    def note(self, now_s: float, what: str, **data: Any) -> None:
        """Write down a conclusion."""
        self.journal.note(now_s, {"what": what, "t_mono": now_s, **data})

    def heard(self, frame: McuEvent, now_s: float) -> None:
        """Journal a line of the MCU that is no block."""
        self.journal.line(now_s, encode_answer(frame))

    def reply(self, ticket: int, text: str) -> None:
        """Keep how a request ended, for whoever asked; the oldest go first."""
        self.replies[ticket] = text
        while len(self.replies) > REPLIES_KEPT:
            del self.replies[next(iter(self.replies))]
