"""What a diagnosis says of what the daemon talks to: a daemon that runs already, the MCU's port, the broker."""

import grp
import os
import secrets
import select
import socket
import ssl
import stat
import time
from collections.abc import Iterator
from pathlib import Path

from hvhost.bench.model import Bench
from hvhost.bench.settings_from import compare_settings
from hvhost.cli.diagnosis import Check, attention, fault, note, ok
from hvhost.ports.opening import open_port
from hvhost.publish.client import Client
from hvhost.publish.places import socket_path
from hvhost.wire.greeting import Greeting
from hvhost.wire.link import Link
from hvhost.words.errors import CannotConnect, HvhostError

GREET_S = 4.0
BROKER_S = 3.0
POLL_S = 0.05
BY_ID = Path("/dev/serial/by-id")


def check_daemon(bench: Bench, option: str) -> tuple[Check, bool]:
    """Whether a daemon serves this bench, what it says, and whether the port must be left to it."""
    path = socket_path(bench.name, option)
    if not os.path.exists(path):
        return note("daemon", f"none on {path}", ""), False
    try:
        with Client.connect(path) as client:
            shot = client.call("status", {"as": "diagnose"})["snapshot"]
    except (HvhostError, KeyError, TypeError) as error:
        return fault("daemon", f"{path} is there but does not answer: {error}", "see its log, then end it"), True
    loop = shot.get("loop") or {}
    text = (f"serves {shot.get('bench')} on {path}: link {shot.get('link')}; longest stall of its loop "
            f"{1e3 * float(loop.get('longest_s', 0.0)):.1f} ms")
    if shot.get("link") == "greeted":
        return ok("daemon", text), True
    return attention("daemon", f"{text} ({shot.get('link_text')})", "see what the link needs"), True


def check_port(device: str) -> Iterator[Check]:
    """The device is there, may be opened by this user, and has a name that is its own."""
    if device.startswith("tcp:"):
        return
    try:
        status = os.stat(device)
    except OSError as error:
        others = ", ".join(str(path) for path in stable_names()) or "none"
        yield fault("port", f"{device}: {error.strerror}", f"plug the board in, or correct port.device; by stable name "
                    f"there is: {others}")
        return
    if not stat.S_ISCHR(status.st_mode):
        yield fault("port", f"{device} is no device", "correct port.device")
        return
    if not os.access(device, os.R_OK | os.W_OK):
        yield fault("port permission", f"{device} is of group {_group(status.st_gid)}", "add this user to that group, "
                    "then log in again")
        return
    yield ok("port permission", f"{device} may be opened")
    stable = [str(path) for path in stable_names() if os.path.realpath(path) == os.path.realpath(device)]
    if stable and not device.startswith(str(BY_ID)):
        yield attention("port name", f"{device} may be another board's after the next replug",
                        f"name it {stable[0]} in the bench file")


def stable_names() -> tuple[Path, ...]:
    """The serial devices by names that stay theirs."""
    try:
        return tuple(sorted(BY_ID.iterdir()))
    except OSError:
        return ()


def _group(gid: int) -> str:
    try:
        return grp.getgrgid(gid).gr_name
    except KeyError:
        return str(gid)


def check_board(bench: Bench, device: str) -> Iterator[Check]:
    """Open the port, greet, compare the settings, let go.  A greeting lowers what an earlier session left energised."""
    try:
        port = open_port(device, bench.port.baud)
    except CannotConnect as error:
        yield fault("port", str(error), error.remedy)
        return
    try:
        found = _greeting(port.fd, bench)
    finally:
        os.close(port.fd)
    if found is None:
        yield fault("board", f"nothing on {device} greets", "see power, wiring, baud rate, firmware")
        return
    info = found.info
    yield ok("board", f"{info.firmware}, boot {info.boot}, {info.rate_hz:g} pairs/s, blocks of {info.block_pairs}")
    if info.causes:
        yield note("latched", ", ".join(info.cause_words), "reset them by name when the bench is understood")
    if found.settings is None:
        yield fault("settings", "blank or damaged", "commission the bench: hvhost commission BENCH")
        return
    differ = compare_settings(bench, found.settings)
    if differ:
        yield fault("settings", "; ".join(f"{f.what}: {f.found} in the MCU, {f.expected} in the file" for f in differ),
                    "commission the bench or mend the file")
    else:
        yield ok("settings", "the MCU's and the bench file's agree")


def _greeting(fd: int, bench: Bench) -> Greeting | None:
    os.set_blocking(fd, False)
    link = Link(time.monotonic(), session=1 + secrets.randbelow(0xFFFFFFFF), lease_ms=round(bench.lease_s * 1000))
    until_s = time.monotonic() + GREET_S
    while link.greeting is None and time.monotonic() < until_s:
        if not _exchanged(fd, link):
            return None
        link.timer(time.monotonic())
    return link.greeting


def _exchanged(fd: int, link: Link) -> bool:
    """Write what is due and read what came within a moment; False where the line is gone."""
    data = link.take_output(time.monotonic())
    try:
        if data and select.select([], [fd], [], POLL_S)[1]:
            data = data[os.write(fd, data):]
        if data:
            link.unsent(data)
        if select.select([fd], [], [], POLL_S)[0]:
            got = os.read(fd, 4096)
            link.receive(got, time.monotonic())
            return bool(got)
    except OSError:
        return False
    return True


def check_broker(bench: Bench) -> Iterator[Check]:
    """The broker that the bench file names: its name, its port, its certificate, and where the password lies."""
    broker = bench.broker
    if broker is None:
        return
    where = f"{broker.host}:{broker.port}"
    try:
        with socket.create_connection((broker.host, broker.port), timeout=BROKER_S) as line:
            if not broker.tls:
                yield ok("broker", f"{where} accepts connections (no TLS)")
            else:
                context = ssl.create_default_context(cafile=broker.ca or None)
                with context.wrap_socket(line, server_hostname=broker.host) as secured:
                    yield ok("broker", f"{where} accepts connections, {secured.version()}, certificate verified")
    except ssl.SSLError as error:
        why = getattr(error, "verify_message", "") or str(error)
        yield attention("broker", f"{where}: {why}", "see mqtt.ca and the broker's certificate; the daemon runs the "
                        "same without a broker, and keeps its events")
    except OSError as error:
        yield attention("broker", f"{where}: {error.strerror or error}", "see mqtt.host; the daemon runs the same "
                        "without a broker, and keeps its events")
    if broker.password_file:
        yield _password_file(Path(broker.password_file))


def _password_file(path: Path) -> Check:
    try:
        mode = path.stat().st_mode
    except OSError as error:
        return fault("broker password", f"{path}: {error.strerror}", "put it there, or correct the bench file")
    if mode & 0o077:
        return attention("broker password", f"{path} may be read by others", f"chmod 600 {path}")
    return ok("broker password", f"{path} may be read by its owner only")
