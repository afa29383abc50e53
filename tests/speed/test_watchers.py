"""Watchers: subscribed, and one that notices that it was thrown out without reading."""

import json
import socket

from hvhost.speed.watchers import subscribed, thrown_out


def test_a_subscription_is_asked_for(tmp_path: object) -> None:
    """One request of the local socket's own method."""
    path = f"{tmp_path}/w.sock"
    with socket.socket(socket.AF_UNIX) as server:
        server.bind(path)
        server.listen()
        with subscribed(path, 10.0) as line:
            far, _ = server.accept()
            assert json.loads(far.recv(1000)) == {"jsonrpc": "2.0", "id": 1, "method": "subscribe",
                                                  "params": {"rate_hz": 10.0}}
            far.sendall(b"x" * 100)
            assert not thrown_out(line)  # unread bytes are no end
            far.close()
            assert thrown_out(line)
