"""Opens a serial port through pyserial, exclusively, without resetting the board, and hands over its descriptor."""

import errno

import serial

from hvhost.ports.descriptor import DescriptorPort
from hvhost.words.errors import CannotConnect


def open_serial(device: str, baud: int) -> DescriptorPort:
    """Open ``device`` raw, 8N1, exclusively; raises `CannotConnect` with the remedy."""
    port = serial.Serial()
    port.port, port.baudrate, port.timeout, port.exclusive = device, baud, 0, True
    port.dtr = False  # many boards reset on the edge of DTR
    port.rts = False
    try:
        port.open()
    except (serial.SerialException, OSError, ValueError) as error:
        raise _explained(device, error) from None
    return DescriptorPort(port.fileno(), device, port.close)


def _explained(device: str, error: Exception) -> CannotConnect:
    code = getattr(error, "errno", None)
    text = str(error)
    if code == errno.ENOENT or "No such file" in text:
        return CannotConnect("a serial port", "no such device", device, "plug the board in, or correct port.device")
    if code == errno.EACCES or "Permission denied" in text:
        return CannotConnect("permission to open the port", "permission denied", device,
                             "add your user to the group that owns the device, then log in again")
    if code in (errno.EBUSY, errno.EAGAIN) or "lock" in text or "busy" in text:
        return CannotConnect("a free port", "in use by another program", device, "stop the other program")
    return CannotConnect("a serial port", text, device, "check the device named in the bench file")
