"""Clients that watch: ``python -m hvhost.speed.watchers SOCKET COUNT RATE`` subscribes so many times and reads.

One more subscribes and never reads again, as a screen does whose terminal was stopped; thrown out, it comes again.
"""

import json
import select
import socket
import sys

READ_MAX = 1 << 20
LOOK_S = 1.0


def subscribed(path: str, rate_hz: float) -> socket.socket:
    """A connection that asked for snapshots."""
    line = socket.socket(socket.AF_UNIX)
    line.connect(path)
    line.sendall(json.dumps({"jsonrpc": "2.0", "id": 1, "method": "subscribe",
                             "params": {"rate_hz": rate_hz}}).encode() + b"\n")
    return line


def main(path: str, count: int, rate_hz: float) -> None:
    """Read until ended."""
    stalled = subscribed(path, rate_hz)
    lines = [subscribed(path, rate_hz) for _ in range(count)]
    print("ready", flush=True)
    while lines:
        for line in select.select(lines, [], [], LOOK_S)[0]:
            if not line.recv(READ_MAX):
                lines.remove(line)
        if thrown_out(stalled):
            stalled.close()
            stalled = subscribed(path, rate_hz)
    stalled.close()


def thrown_out(line: socket.socket) -> bool:
    """Whether the other end is gone, told without reading anything."""
    look = select.poll()
    look.register(line, 0)
    return any(event & select.POLLHUP for _, event in look.poll(0))


if __name__ == "__main__":
    main(sys.argv[1], int(sys.argv[2]), float(sys.argv[3]))
