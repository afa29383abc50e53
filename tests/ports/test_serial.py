"""Opening a serial port: raw, exclusive, and every refusal as a sentence with its remedy."""

import asyncio
import errno
import os
import termios
from pathlib import Path

import pytest
import serial

from hvhost.ports.descriptor import DescriptorPort
from hvhost.ports.serial import _explained, open_serial
from hvhost.words.errors import CannotConnect


def close(port: DescriptorPort) -> None:
    """Attach and close, as the daemon does."""
    async def run() -> None:
        port.attach(lambda data: None, lambda: None, lambda reason: None)
        port.close()

    asyncio.run(run())


def test_a_terminal_is_opened_raw() -> None:
    """No byte is changed on its way: no echo, no line editing, no translation."""
    master, slave = os.openpty()
    port = open_serial(os.ttyname(slave), 115_200)
    iflag, oflag, _, lflag, *_ = termios.tcgetattr(port.fd)
    assert not lflag & (termios.ECHO | termios.ICANON | termios.ISIG)
    assert not oflag & termios.OPOST
    assert not iflag & (termios.ICRNL | termios.IXON | termios.ISTRIP)
    data = bytes(range(256))
    os.write(port.fd, data)
    assert os.read(master, 512) == data
    close(port)
    os.close(master)
    os.close(slave)


def test_a_second_opening_is_refused() -> None:
    """One program at a time: the second is told that the port is in use."""
    master, slave = os.openpty()
    port = open_serial(os.ttyname(slave), 115_200)
    with pytest.raises(CannotConnect) as refused:
        open_serial(os.ttyname(slave), 115_200)
    assert "in use by another program" in str(refused.value)
    close(port)
    os.close(master)
    os.close(slave)


@pytest.mark.parametrize(("error", "words"), [
    (OSError(errno.ENOENT, "No such file or directory"), ("no such device", "plug the board in")),
    (OSError(errno.EACCES, "Permission denied"), ("permission denied", "group that owns the device")),
    (serial.SerialException("[Errno 13] could not open port /dev/x: [Errno 13] Permission denied: '/dev/x'"),
     ("permission denied", "group that owns the device")),
    (serial.SerialException("Could not exclusively lock port /dev/x: [Errno 11] Resource temporarily unavailable"),
     ("in use by another program", "stop the other program")),
    (OSError(errno.EBUSY, "Device or resource busy"), ("in use by another program", "stop the other program")),
    (OSError(errno.EIO, "Input/output error"), ("Input/output error", "check the device")),
])
def test_every_refusal_names_its_remedy(error: Exception, words: tuple[str, ...]) -> None:
    """What the system or pyserial says becomes expected, found, place and remedy."""
    told = _explained("/dev/x", error)
    for word in (*words, "/dev/x"):
        assert word in str(told)


def test_a_file_is_no_port(tmp_path: Path) -> None:
    """A file that is no terminal is refused, not opened."""
    path = tmp_path / "file"
    path.write_bytes(b"")
    with pytest.raises(CannotConnect):
        open_serial(str(path), 115_200)


@pytest.mark.skipif(os.geteuid() == 0, reason="root may open anything")
def test_permission_denied() -> None:
    """A device without permission says which group to join."""
    master, slave = os.openpty()
    os.fchmod(slave, 0)
    with pytest.raises(CannotConnect) as refused:
        open_serial(os.ttyname(slave), 115_200)
    assert "permission denied" in str(refused.value)
    os.close(master)
    os.close(slave)
