"""The device text of a bench file chooses the port."""

import os
import socket

import pytest

from hvhost.ports.opening import open_port
from hvhost.words.errors import CannotConnect


@pytest.mark.parametrize("text", [
    "tcp:", "tcp://", "tcp://:5025", "tcp:host", "tcp:host:", "tcp:host:x", "tcp:host:0", "tcp:host:70000",
    "tcp://host:99999999999999999999", "tcp:host:-1", "tcp:host:１２"])
def test_a_malformed_address_is_refused(text: str) -> None:
    """What is no HOST:PORT is refused with the place in the bench file."""
    with pytest.raises(CannotConnect) as refused:
        open_port(text, 115_200)
    assert "tcp://HOST:PORT" in str(refused.value)
    assert "correct the bench file" in str(refused.value)


@pytest.mark.parametrize("start", ["tcp:", "tcp://"])
def test_tcp_opens_a_connection(start: str) -> None:
    """``tcp://HOST:PORT`` connects, and so does it without the slashes."""
    with socket.create_server(("127.0.0.1", 0)) as server:
        port = open_port(f"{start}127.0.0.1:{server.getsockname()[1]}", 0)
        peer, _ = server.accept()
        with peer:
            os.write(port.fd, b"hello")
            assert peer.recv(5) == b"hello"
        port._close()


def test_anything_else_is_a_serial_device() -> None:
    """A path that is not there is told as a device that is missing."""
    with pytest.raises(CannotConnect) as refused:
        open_port("/dev/none-such", 115_200)
    assert "no such device" in str(refused.value)
