"""Opens a TCP connection to a serial server and hands over its descriptor."""

import socket

from hvhost.ports.descriptor import DescriptorPort
from hvhost.words.errors import CannotConnect

CONNECT_S = 5.0
UNHEARD_MS = 5000  # sent bytes that nobody acknowledges for so long end the connection, so that it is tried again


def open_tcp(host: str, port: int) -> DescriptorPort:
    """Connect; raises `CannotConnect` with the remedy."""
    try:
        link = socket.create_connection((host, port), timeout=CONNECT_S)
    except OSError as error:
        raise CannotConnect("a serial server", str(error), f"tcp:{host}:{port}",
                            "start it, or correct port.device") from None
    link.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
    if hasattr(socket, "TCP_USER_TIMEOUT"):
        # a server that lost its power says nothing: without this the system waits a quarter of an hour for it
        link.setsockopt(socket.IPPROTO_TCP, socket.TCP_USER_TIMEOUT, UNHEARD_MS)
    return DescriptorPort(link.fileno(), f"tcp:{host}:{port}", link.close)
