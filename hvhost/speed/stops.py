"""B3: a stop by key, local socket, broker and instrument socket, to the first byte of it at the port, under full load.

Each path has a bare twin that ends at a second terminal of the same relay: the same sockets, the same broker, an event
loop with nothing else on it, a cut written for whatever comes.  Both are asked in turn by blocks while the daemon
judges ten thousand pairs a second, records, and serves its watchers; a run is prepared, so that the recorder runs, and
not energised, so that hundreds of cuts need not wait for as many discharges.
"""

import fcntl
import json
import os
import pty
import socket
import struct
import subprocess
import sys
import termios
import threading
import time
from collections.abc import Callable
from contextlib import ExitStack, suppress
from dataclasses import dataclass
from typing import Any

from hvhost.speed.bareloop import BareLoop
from hvhost.speed.figures import Line, Sides, flat
from hvhost.speed.loaded import STATION, Loaded
from hvhost.speed.scene import WHO, request
from hvhost.speed.setting import Setting
from hvhost.speed.standing import _cleared, until_shot
from hvhost.words.errors import CannotConnect

PER_BLOCK = 8  # stops in a block: each waits until the one before is confirmed and quiet
QUIET_S = 0.05  # longer than the pause between repeats of an unanswered stop, and within the broker's rate
ANSWER_S = 5.0
SETTLE_S = 3.0
CALM_S = 0.02  # a machine that keeps a bare loop waiting longer is not judged by its longest stop
PREFIX = f"hvhost/v1/{STATION}"
BARE_TOPIC = "speed/bare"
SIZE = struct.pack("HHHH", 24, 80, 0, 0)


@dataclass(frozen=True, slots=True, kw_only=True)
class Path:
    """One way to stop: what sends it to the daemon, and what sends its like to the bare twin."""

    name: str
    daemon: Callable[[], None]
    bare: Callable[[], None]


def measure(setting: Setting) -> list[Line]:
    """Return the lines of B3: one for each path that this machine has, and the longest of all."""
    with Loaded(setting) as loaded, ExitStack() as stack:
        _prepare(loaded)
        twins = _twins(loaded, setting)
        paths = [_local(stack, loaded, twins), _key(stack, loaded, twins), _instrument(stack, loaded, twins)]
        if loaded.broker:
            paths.append(_broker(stack, loaded))
        time.sleep(SETTLE_S)
        bare = BareLoop()
        try:
            found = {path.name: _sides(setting, loaded, path) for path in paths}
        finally:
            machine = bare.end()
    longest = max(max(flat(sides.ours)) for sides in found.values())
    calm = machine["longest_s"] < CALM_S
    return [*(_line(name, sides) for name, sides in found.items()), Line(
        budget="B3", what="the longest of all these stops", measured=1e3 * longest, unit="ms", bound=50.0,
        against="the wall clock", judged=calm,
        note=f"a bare loop beside it was late by {1e3 * machine['longest_s']:.0f} ms at most"
             + ("" if calm else ": not judged, the machine's own stalls are in it"))]


def _line(name: str, sides: Sides) -> Line:
    raw = sides.raw(1e3)
    return Line(budget="B3", what=f"stop by {name} to its first byte at the port, median", measured=sides.ratio,
                unit="x", bound=3.0, aim=2.0, against="a bare echo over the same path",
                note=f"{raw['ours']['median']:.2f} ms against {raw['other']['median']:.2f} ms; p99 "
                     f"{raw['ours']['p99']:.1f} ms against {raw['other']['p99']:.1f} ms", raw=raw)


def _prepare(loaded: Loaded) -> None:
    """Open a run, so that everything that comes is recorded."""
    client = loaded.client()
    ticket = client.call("seat.take", {"as": WHO, "reason": WHO})["ticket"]
    until_shot(client, lambda shot: bool(shot.get("reading")), "a reading")
    until_shot(client, lambda shot: _cleared(client, ticket, shot), "a cleared latch")
    client.call("run", {**request(3.0), "ticket": ticket, "as": WHO})


def _sides(setting: Setting, loaded: Loaded, path: Path) -> Sides:
    ours: list[tuple[float, ...]] = []
    other: list[tuple[float, ...]] = []
    for k in range(2 * setting.blocks):
        mine = k % 4 in (0, 3)
        send, side = (path.daemon, "daemon") if mine else (path.bare, "bare")
        (ours if mine else other).append(tuple([_one(loaded, path.name, send, side) for _ in range(PER_BLOCK)]))
        setting.say(f"{path.name}, block {k // 2 + 1} of {setting.blocks}")
    return Sides(ours=tuple(ours), other=tuple(other))


def _one(loaded: Loaded, name: str, send: Callable[[], None], side: str) -> float:
    loaded.relay.drain(QUIET_S)
    begun_ns = time.monotonic_ns()
    send()
    at_ns = loaded.relay.passed(side, ANSWER_S)
    if at_ns is None:
        raise CannotConnect(f"a stop by {name} at the {side} port", "none", "speed B3")
    return (at_ns - begun_ns) * 1e-9


# ------------------------------------------------------------ the paths


def _twins(loaded: Loaded, setting: Setting) -> dict[str, str]:
    """Start the bare things; returns where each is reached."""
    terminal, path = loaded.relay.bare, str(setting.place() / "bare.sock")
    loaded.child("hvhost.speed.echo", terminal, "unix", path)
    port = loaded.child("hvhost.speed.echo", terminal, "tcp")
    if loaded.broker:
        loaded.child("hvhost.speed.echo", terminal, "mqtt", "127.0.0.1", str(loaded.broker), BARE_TOPIC)
    return {"unix": path, "tcp": port}


def _local(stack: ExitStack, loaded: Loaded, twins: dict[str, str]) -> Path:
    daemon = stack.enter_context(socket.socket(socket.AF_UNIX))
    daemon.connect(loaded.daemon.socket)
    bare = stack.enter_context(socket.socket(socket.AF_UNIX))
    bare.connect(twins["unix"])
    line = json.dumps({"jsonrpc": "2.0", "id": 1, "method": "cut", "params": {}}).encode() + b"\n"
    return Path(name="local socket", daemon=lambda: _send(daemon, line), bare=lambda: _send(bare, line))


def _instrument(stack: ExitStack, loaded: Loaded, twins: dict[str, str]) -> Path:
    lines = [stack.enter_context(socket.create_connection(("127.0.0.1", port), timeout=ANSWER_S))
             for port in (loaded.instrument, int(twins["tcp"]))]
    for line in lines:
        line.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        line.settimeout(None)
    daemon, bare = lines
    return Path(name="instrument socket", daemon=lambda: _send(daemon, b"OUTP OFF\n"),
                bare=lambda: _send(bare, b"OUTP OFF\n"))


def _send(line: socket.socket, data: bytes) -> None:
    """Send, and read what earlier answers wait."""
    line.sendall(data)
    with suppress(BlockingIOError):
        line.recv(65_536, socket.MSG_DONTWAIT)


def _key(stack: ExitStack, loaded: Loaded, twins: dict[str, str]) -> Path:
    screen = _Terminal(stack, [sys.executable, "-m", "hvhost", "watch", "--socket", loaded.daemon.socket])
    bare = _Terminal(stack, [sys.executable, "-m", "hvhost.speed.echo", "none", "key", twins["unix"]])
    for one in (screen, bare):
        one.wait_shown()
    return Path(name="key of the screen", daemon=lambda: screen.press(b"c"), bare=lambda: bare.press(b"c"))


class _Terminal:
    """A process on a terminal of 80 by 24 whose output is read and thrown away."""

    def __init__(self, stack: ExitStack, command: list[str]) -> None:
        self._master, slave = pty.openpty()
        fcntl.ioctl(slave, termios.TIOCSWINSZ, SIZE)
        self._child = subprocess.Popen(command, stdin=slave, stdout=slave, stderr=slave, start_new_session=True,
                                       env={**os.environ, "TERM": "xterm"})
        os.close(slave)
        self._shown = threading.Event()
        self._reader = threading.Thread(target=self._read, daemon=True)
        self._reader.start()
        stack.callback(self._end)

    def press(self, key: bytes) -> None:
        """Press a key."""
        os.write(self._master, key)

    def wait_shown(self) -> None:
        """Wait until something is shown."""
        if not self._shown.wait(30.0):
            raise CannotConnect("a screen", "nothing was shown", "speed B3")

    def _read(self) -> None:
        with suppress(OSError):  # the other end is gone
            while os.read(self._master, 65_536):
                self._shown.set()

    def _end(self) -> None:
        self._child.terminate()
        self._child.wait()
        self._reader.join(5.0)
        os.close(self._master)


def _broker(stack: ExitStack, loaded: Loaded) -> Path:
    from paho.mqtt.client import Client
    from paho.mqtt.enums import CallbackAPIVersion

    session: list[str] = []
    told = threading.Event()
    client = Client(CallbackAPIVersion.VERSION2, client_id="speed-stops")

    def message(_client: Any, _data: Any, message: Any) -> None:
        state = json.loads(message.payload)
        if state.get("available"):
            session[:] = [state["session"]]
            told.set()

    def opened(_client: Any, _data: Any, line: Any) -> None:
        line.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)

    client.on_message, client.on_socket_open = message, opened
    client.connect("127.0.0.1", loaded.broker)
    client.subscribe(f"{PREFIX}/state", 1)
    client.loop_start()
    stack.callback(client.loop_stop)
    stack.callback(client.disconnect)
    if not told.wait(10.0):
        raise CannotConnect("the daemon's state from the broker", "none", "speed B3")

    def order() -> None:
        now_ns = time.time_ns()
        client.publish(f"{PREFIX}/command/cut", json.dumps(
            {"session": session[0], "counter": now_ns, "expires": now_ns + 5_000_000_000, "from": WHO}), 1)

    return Path(name="broker", daemon=order, bare=lambda: _published(client))


def _published(client: Any) -> None:
    client.publish(BARE_TOPIC, "cut", 1)
