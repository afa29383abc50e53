"""Time as an argument: what a clock owes, and one that a rehearsal or a test turns by hand.

Control uses ``now_s`` (monotonic seconds, any origin) only; ``utc_ns`` is for records.  The machine's own clock is a
port, not a word: it lives with the ports.
"""

from dataclasses import dataclass
from typing import Protocol


class Clock(Protocol):
    """Monotonic seconds for control, UTC nanoseconds for the record."""

    def now_s(self) -> float:
        """Monotonic seconds from an arbitrary origin; never goes back."""
        ...

    def utc_ns(self) -> int:
        """UTC in nanoseconds since 1970-01-01; may jump when the machine's clock is set."""
        ...


@dataclass(slots=True)
class VirtualClock:
    """A clock that moves only when told to; kept in whole nanoseconds so that steps never lose a bit."""

    elapsed_ns: int = 0
    utc_origin_ns: int = 1_767_225_600_000_000_000  # 2026-01-01T00:00:00Z

    def now_s(self) -> float:
        """Seconds told so far."""
        return self.elapsed_ns / 1e9

    def utc_ns(self) -> int:
        """UTC that follows the told time, plus any jump."""
        return self.utc_origin_ns + self.elapsed_ns

    def advance_s(self, seconds: float) -> None:
        """Move on; time never goes back."""
        self.advance_ns(round(seconds * 1e9))

    def advance_ns(self, nanoseconds: int) -> None:
        """Move on by whole nanoseconds."""
        if nanoseconds < 0:
            raise ValueError("a monotonic clock never goes back")
        self.elapsed_ns += nanoseconds

    def advance_to_s(self, now_s: float) -> None:
        """Move on to a moment; a moment already past changes nothing."""
        self.elapsed_ns = max(self.elapsed_ns, round(now_s * 1e9))

    def jump_utc_ns(self, nanoseconds: int) -> None:
        """Set the wall clock forward or back; monotonic time does not notice."""
        self.utc_origin_ns += nanoseconds
