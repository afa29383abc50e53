"""What the kernel tells about its clock: whether anything disciplines it, and how wrong it may be (Linux)."""

import ctypes
import struct
from dataclasses import dataclass

BUFFER = 512  # more than any struct timex
TIME_ERROR = 5  # adjtimex(2): the clock is not synchronised
STA_UNSYNC = 0x40
# struct timex of 64-bit Linux: modes, padding, offset, freq, maxerror, esterror, status
HEAD = struct.Struct("@I4xlllli")


@dataclass(frozen=True, slots=True)
class ClockState:
    """Whether the clock is synchronised, and the most by which it is wrong by the kernel's own account, in seconds."""

    synchronised: bool
    worst_s: float


def clock_state() -> ClockState | None:
    """Ask the kernel, changing nothing; None where it does not tell."""
    if struct.calcsize("P") != 8:
        return None
    buffer = ctypes.create_string_buffer(BUFFER)  # modes 0: read only
    try:
        told = ctypes.CDLL(None, use_errno=True).adjtimex(buffer)
    except (OSError, AttributeError):
        return None
    if told < 0:
        return None
    _, _, _, worst_us, _, status = HEAD.unpack_from(buffer.raw)
    return ClockState(synchronised=told != TIME_ERROR and not status & STA_UNSYNC, worst_s=worst_us * 1e-6)
