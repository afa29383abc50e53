"""A broker of the tests' own: its configuration, certificates and process, on a free port of this machine."""

import contextlib
import os
import shutil
import signal
import socket
import subprocess
import time
from pathlib import Path

import pytest

PROGRAM = shutil.which("mosquitto") or ("/usr/sbin/mosquitto" if Path("/usr/sbin/mosquitto").exists() else None)
LACKING = "mosquitto is not installed (apt-get install mosquitto)"


def need_broker() -> None:
    """Skip with a reason where no broker is installed; in CI its absence is a failure."""
    if PROGRAM is None or shutil.which("openssl") is None:
        if os.environ.get("HVHOST_CI"):
            pytest.fail(LACKING)
        pytest.skip(LACKING)


def free_port() -> int:
    """A port that nobody listens on now."""
    with socket.socket() as one:
        one.bind(("127.0.0.1", 0))
        return int(one.getsockname()[1])


class Mosquitto:
    """One broker; ``extra`` are lines of its configuration behind the listener's."""

    def __init__(self, folder: Path, extra: str = "allow_anonymous true\n", port: int = 0, before: str = "") -> None:
        folder.mkdir(exist_ok=True, parents=True)
        self.port = port or free_port()
        self.log = folder / "broker.log"
        self.config = folder / "broker.conf"
        user = os.environ.get("USER", "root")
        self.config.write_text(f"{before}persistence false\nuser {user}\nlog_dest file {self.log}\nlog_type all\n"
                               f"set_tcp_nodelay true\nlistener {self.port} 127.0.0.1\n{extra}")
        self.process: subprocess.Popen[bytes] | None = None

    def start(self) -> "Mosquitto":
        """Start it and wait until it takes connections."""
        assert PROGRAM is not None
        self.process = subprocess.Popen([PROGRAM, "-c", str(self.config)], stdout=subprocess.DEVNULL,
                                        stderr=subprocess.DEVNULL)
        until = time.monotonic() + 10
        while time.monotonic() < until:
            with contextlib.suppress(OSError), socket.create_connection(("127.0.0.1", self.port), 1):
                return self
            assert self.process.poll() is None, self.log.read_text() if self.log.exists() else "no log"
            time.sleep(0.005)
        raise TimeoutError("the broker does not listen")

    def signal(self, number: signal.Signals) -> None:
        """Send a signal: SIGSTOP freezes, SIGCONT thaws."""
        assert self.process is not None
        self.process.send_signal(number)

    def kill(self) -> None:
        """End it at once and collect it."""
        if self.process is not None:
            with contextlib.suppress(ProcessLookupError):
                self.process.send_signal(signal.SIGCONT)
            self.process.kill()
            self.process.wait()
            self.process = None


def _openssl(*args: str) -> None:
    subprocess.run(["openssl", *args], check=True, capture_output=True)


class Certificates:
    """An authority, a broker for 'localhost' and a client, in a folder; ``other`` is another authority's."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        for authority in ("ca", "otherca"):
            _openssl("req", "-x509", "-newkey", "ec", "-pkeyopt", "ec_paramgen_curve:prime256v1", "-nodes",
                     "-days", "2", "-subj", f"/CN=hvhost test {authority}", "-keyout", self.path(f"{authority}.key"),
                     "-out", self.path(f"{authority}.pem"), "-addext", "basicConstraints=critical,CA:TRUE",
                     "-addext", "keyUsage=critical,keyCertSign")
        self._issue("broker", "localhost", "ca")
        self._issue("elsewhere", "elsewhere.example", "ca")
        self._issue("other", "localhost", "otherca")
        self._issue("client", "bench", "ca")

    def path(self, name: str) -> str:
        """The path of one file."""
        return str(self.folder / name)

    def _issue(self, name: str, host: str, authority: str) -> None:
        extensions = self.folder / f"{name}.ext"
        extensions.write_text(f"subjectAltName=DNS:{host}\n")
        _openssl("req", "-newkey", "ec", "-pkeyopt", "ec_paramgen_curve:prime256v1", "-nodes", "-subj", f"/CN={host}",
                 "-keyout", self.path(f"{name}.key"), "-out", self.path(f"{name}.csr"))
        _openssl("x509", "-req", "-in", self.path(f"{name}.csr"), "-CA", self.path(f"{authority}.pem"), "-CAkey",
                 self.path(f"{authority}.key"), "-CAcreateserial", "-days", "2", "-extfile", str(extensions),
                 "-out", self.path(f"{name}.pem"))
