"""A daemon under full load: ten thousand pairs a second, recorder, broker, instrument socket, ten watchers and one
that is stalled.  What the machine has not got (a broker) is left out and said.
"""

import contextlib
import shutil
import socket
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path

from hvhost.publish.client import Client
from hvhost.speed.loadboard import LoadBoard
from hvhost.speed.relay import Relay
from hvhost.speed.setting import Setting
from hvhost.speed.standing import Daemon
from hvhost.words.errors import CannotConnect

WATCHERS, RATE_HZ = 10, 10.0
STATION = "speed"
# a broker that waits with a small packet for the acknowledgement of the one before delays a stop by tens of ms
BROKER_CONFIG = ("listener {port} 127.0.0.1\nallow_anonymous true\npersistence false\nlog_type none\n"
                 "set_tcp_nodelay true\n")
MQTT = """mqtt:
  host: 127.0.0.1
  port: {port}
  tls: no
  station: speed
  commands: yes
  telemetry: 100 ms
  queue_folder: {folder}
"""
INSTRUMENT = "instrument:\n  listen: 127.0.0.1:{port}\n"
# the example bench at ten times its rate: a follow-up of 10 ms would be more samples than the guard looks back
AT_10_K = (("  rate: 1 kHz\n", "  rate: 10 kHz\n"), ("programming_delay: 10 ms", "programming_delay: 5 ms"))


class Loaded:
    """Everything started; leaving the context ends it.  ``broker`` is its port, 0 where there is none."""

    def __init__(self, setting: Setting) -> None:
        self._stack = contextlib.ExitStack()
        self.broker = _broker(self._stack, setting)
        self.instrument = free_port()
        bench = _bench(setting, self.broker, self.instrument)
        self.board = self._stack.enter_context(LoadBoard(bench))
        self.relay = self._stack.enter_context(Relay(self.board.device))
        self.daemon = Daemon(setting, self.relay, setting.place(), bench)
        self._setting = setting

    def __enter__(self) -> "Loaded":
        try:
            self.daemon.start()
            self._stack.callback(self.daemon.kill)
            self.daemon.reporting()
            self.child("hvhost.speed.watchers", self.daemon.socket, str(WATCHERS), f"{RATE_HZ:g}")
        except BaseException:
            self._stack.close()
            raise
        return self

    def __exit__(self, *_: object) -> None:
        self._stack.close()

    def child(self, module: str, *arguments: str, stdin: int = subprocess.DEVNULL) -> str:
        """Start a helper of this measurement, wait for its first line and return it."""
        child = subprocess.Popen([sys.executable, "-m", module, *arguments], stdin=stdin, stdout=subprocess.PIPE)
        self._stack.callback(_end, child)
        assert child.stdout is not None
        word = child.stdout.readline().decode().strip()
        if not word:
            raise CannotConnect(f"{module} to begin", "it ended", "speed")
        return word

    def client(self) -> Client:
        """One more connection to the daemon."""
        return self._stack.enter_context(Client.connect(self.daemon.socket))


def free_port() -> int:
    """A port of this machine that nobody uses just now."""
    with socket.create_server(("127.0.0.1", 0)) as server:
        return int(server.getsockname()[1])


def _bench(setting: Setting, broker: int, instrument: int) -> Path:
    text = setting.bench.read_text(encoding="utf-8")
    for old, new in AT_10_K:
        if old not in text:
            raise CannotConnect(f"{old.strip()!r} in the example bench", "none", str(setting.bench))
        text = text.replace(old, new)
    if broker:
        text += MQTT.format(port=broker, folder=setting.place())
    text += INSTRUMENT.format(port=instrument)
    path = setting.place() / "loaded.bench.yaml"
    path.write_text(text, encoding="utf-8")
    return path


def _broker(stack: contextlib.ExitStack, setting: Setting) -> int:
    """Start a broker; 0 where none is installed."""
    program = shutil.which("mosquitto", path="/usr/sbin:/usr/local/sbin:/usr/bin:/usr/local/bin")
    if program is None:
        setting.say("no broker is installed here: measured without one")
        return 0
    port = free_port()
    config = setting.place() / "broker.conf"
    config.write_text(BROKER_CONFIG.format(port=port), encoding="ascii")
    child = subprocess.Popen([program, "-c", str(config)], stdin=subprocess.DEVNULL, stdout=subprocess.DEVNULL,
                             stderr=subprocess.DEVNULL)
    stack.callback(_end, child)
    for _ in _tries(10.0):
        with socket.socket() as probe:
            if probe.connect_ex(("127.0.0.1", port)) == 0:
                return port
    raise CannotConnect("a broker that answers", "none", f"127.0.0.1:{port}")


def _tries(longest_s: float) -> Iterator[None]:
    until_s = time.monotonic() + longest_s
    while time.monotonic() < until_s:
        yield
        time.sleep(0.02)


def _end(child: "subprocess.Popen[bytes]") -> None:
    child.terminate()
    child.wait()
    if child.stdout is not None:
        child.stdout.close()
