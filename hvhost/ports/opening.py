"""Chooses the port from the device text of a bench file: ``tcp://HOST:PORT`` or a serial device."""

from hvhost.ports.descriptor import DescriptorPort
from hvhost.words.errors import CannotConnect


def open_port(device: str, baud: int) -> DescriptorPort:
    """Open what ``device`` names; raises `CannotConnect`."""
    if device.startswith("tcp:"):
        from hvhost.ports.tcp import open_tcp

        host, colon, port = device[4:].removeprefix("//").rpartition(":")
        number = int(port) if port.isascii() and port.isdecimal() and len(port) <= 5 else 0
        if not host or not colon or not 0 < number < 65536:
            raise CannotConnect("tcp://HOST:PORT", repr(device), "port.device", "correct the bench file")
        return open_tcp(host.removeprefix("[").removesuffix("]"), number)
    from hvhost.ports.serial import open_serial

    return open_serial(device, baud)
