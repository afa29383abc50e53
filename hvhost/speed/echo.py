"""The bare things that stops are compared with: each takes a line on one path and writes a cut to a terminal.

``python -m hvhost.speed.echo TERMINAL unix PATH``, ``... tcp``, ``... mqtt HOST PORT TOPIC``: an event loop with
nothing else on it (the broker's client: a thread of its library), no check, no session, no number.  ``... key PATH``
stands for the screen: it reads a key from its own terminal and sends a line to a socket.  The first line on standard
output says that it is ready; of ``tcp`` it is the port.
"""

import asyncio
import os
import socket
import sys
import tty
from typing import Any

CUT = b"\ncut 1\n"


class Echo(asyncio.Protocol):
    """Writes a cut for whatever comes."""

    def __init__(self, fd: int) -> None:
        self._fd = fd

    def data_received(self, data: bytes) -> None:
        """One read, one cut."""
        os.write(self._fd, CUT)


async def _serve(terminal: str, path: str) -> None:
    fd = os.open(terminal, os.O_RDWR | os.O_NOCTTY)
    loop = asyncio.get_running_loop()
    if path:
        server = await loop.create_unix_server(lambda: Echo(fd), path)
        print("ready", flush=True)
    else:
        server = await loop.create_server(lambda: Echo(fd), "127.0.0.1", 0)
        print(server.sockets[0].getsockname()[1], flush=True)
    await server.serve_forever()


def _broker(terminal: str, host: str, port: int, topic: str) -> None:
    from paho.mqtt.client import Client
    from paho.mqtt.enums import CallbackAPIVersion

    fd = os.open(terminal, os.O_RDWR | os.O_NOCTTY)
    client = Client(CallbackAPIVersion.VERSION2, client_id="speed-bare")

    def message(*_: Any) -> None:
        os.write(fd, CUT)

    client.on_message = message
    client.on_subscribe = lambda *_: print("ready", flush=True)
    client.connect(host, port)
    client.subscribe(topic, 1)
    client.loop_forever()


def _key(path: str) -> None:
    tty.setcbreak(0)
    with socket.socket(socket.AF_UNIX) as line:
        line.connect(path)
        print("ready", flush=True)
        while os.read(0, 1):
            line.sendall(b"cut\n")


def main(terminal: str, kind: str, *more: str) -> None:
    """Run one of them until ended."""
    if kind == "unix":
        asyncio.run(_serve(terminal, more[0]))
    elif kind == "tcp":
        asyncio.run(_serve(terminal, ""))
    elif kind == "mqtt":
        _broker(terminal, more[0], int(more[1]), more[2])
    else:
        _key(more[0])


if __name__ == "__main__":
    main(*sys.argv[1:])
