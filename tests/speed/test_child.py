"""The far end of the pseudo-terminal, as a process."""

import os
from pathlib import Path

from hvhost.speed.child import Device


def test_it_pours_exactly_what_it_is_told(tmp_path: Path) -> None:
    """Bytes from here to there of its file, no more."""
    with Device(tmp_path, b"0123456789\n" * 20) as device:
        device.pour(3, 14)
        seen = b""
        while len(seen) < 11:
            seen += os.read(device.fd, 64)
        assert seen == b"3456789\n012"
        device.await_done()


def test_it_times_an_answer(tmp_path: Path) -> None:
    """Nanoseconds from its write to the first byte that comes back."""
    with Device(tmp_path) as device:
        device.ask(b"hello\n")
        assert os.read(device.fd, 64) == b"hello\n"
        os.write(device.fd, b"x\n")
        assert int(device.answer()) > 0
