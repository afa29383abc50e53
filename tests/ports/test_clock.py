"""The system's clocks."""

import time

from hvhost.ports.clock import SystemClock


def test_clock_reads_the_system_s_clocks() -> None:
    """Monotonic seconds never go back; UTC is the system's wall clock in nanoseconds."""
    clock = SystemClock()
    first = clock.now_s()
    assert first <= clock.now_s()
    assert time.time_ns() - 60_000_000_000 < clock.utc_ns() < time.time_ns() + 60_000_000_000
