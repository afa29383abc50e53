"""A TCP serial server: connected without delay, or refused with a remedy."""

import socket

import pytest

from hvhost.ports.tcp import UNHEARD_MS, open_tcp
from hvhost.words.errors import CannotConnect


def test_small_writes_leave_at_once() -> None:
    """Nagle's delay is off, a cut is 40 bytes; and a server that is gone without a word is noticed."""
    with socket.create_server(("127.0.0.1", 0)) as server:
        port = open_tcp("127.0.0.1", server.getsockname()[1])
        peer, _ = server.accept()
        peer.close()
        taken = socket.socket(fileno=port.fd)
        try:
            assert taken.getsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY)
            if hasattr(socket, "TCP_USER_TIMEOUT"):
                assert taken.getsockopt(socket.IPPROTO_TCP, socket.TCP_USER_TIMEOUT) == UNHEARD_MS
        finally:
            taken.detach()
            port._close()


def test_nobody_there() -> None:
    """A refused connection names host, port and remedy."""
    with socket.socket() as taken:
        taken.bind(("127.0.0.1", 0))  # bound, not listening
        number = taken.getsockname()[1]
        with pytest.raises(CannotConnect) as refused:
            open_tcp("127.0.0.1", number)
    assert f"tcp:127.0.0.1:{number}" in str(refused.value)
    assert "correct port.device" in str(refused.value)
