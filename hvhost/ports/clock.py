"""The system's clocks, behind the protocol of `words.clocks.Clock`."""

import time


class SystemClock:
    """Monotonic seconds for control, UTC nanoseconds for records."""

    def now_s(self) -> float:
        """Return monotonic seconds."""
        return time.monotonic()

    def utc_ns(self) -> int:
        """Return UTC nanoseconds since 1970."""
        return time.time_ns()
