"""What a diagnosis says of daemon, port, board and broker."""

import os
import pty
import socket
import ssl
import threading
import tty
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from dataclasses import replace
from pathlib import Path

import pytest

from hvhost.bench.broker import MqttBlock, broker_of
from hvhost.bench.file import load_bench
from hvhost.cli import diagnose_lines as dl
from hvhost.cli.diagnosis import Check, Verdict
from hvhost.standin.bench import StandIn
from hvhost.standin.eeprom import Eeprom
from hvhost.standin.params import demo
from tests.publish.serving import served

BENCH = load_bench(Path(__file__).parents[2] / "configs" / "demo.bench.yaml")


def test_no_daemon_one_that_serves_and_one_that_does_not_answer(tmp_path: Path) -> None:
    """The port is left to a daemon that is there, whether it answers or not."""
    found, there = dl.check_daemon(BENCH, str(tmp_path / "none.sock"))
    assert (found.verdict, there) == (Verdict.NOTE, False)
    with served(tmp_path) as bench:
        bench.answers["status"] = {"snapshot": {"bench": "demo", "link": "greeted", "loop": {"longest_s": 0.0123}}}
        found, there = dl.check_daemon(BENCH, bench.path)
        assert (found.verdict, there) == (Verdict.OK, True)
        assert "longest stall of its loop 12.3 ms" in found.found
        bench.answers["status"] = {"snapshot": {"bench": "demo", "link": "lost", "link_text": "port lost"}}
        found, there = dl.check_daemon(BENCH, bench.path)
        assert (found.verdict, there) == (Verdict.ATTENTION, True)
        assert "port lost" in found.found
        bench.answers["status"] = {}
        assert dl.check_daemon(BENCH, bench.path)[0].verdict is Verdict.FAULT


def one(checks: Iterator[Check]) -> Check:
    """The only check."""
    (found,) = checks
    return found


def test_a_port_that_is_not_there_or_no_device(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The stable names that are there are offered; a plain file is no port; a TCP port has no permission to look at."""
    by_id = tmp_path / "by-id"
    by_id.mkdir()
    (by_id / "usb-board-1").symlink_to(tmp_path / "gone")
    monkeypatch.setattr(dl, "BY_ID", by_id)
    found = one(dl.check_port(str(tmp_path / "ttyX")))
    assert found.verdict is Verdict.FAULT
    assert str(by_id / "usb-board-1") in found.remedy
    (tmp_path / "file").write_text("")
    assert one(dl.check_port(str(tmp_path / "file"))).verdict is Verdict.FAULT
    assert list(dl.check_port("tcp://127.0.0.1:1")) == []


def test_a_port_that_may_not_be_opened_names_the_group(monkeypatch: pytest.MonkeyPatch) -> None:
    """The remedy is the group that owns the device."""
    monkeypatch.setattr(os, "access", lambda path, mode: False)
    found = one(dl.check_port("/dev/null"))
    assert found.verdict is Verdict.FAULT
    assert "of group " in found.found


def test_a_name_that_another_board_may_take_is_told(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A device that has a stable name should be named by it."""
    (tmp_path / "usb-board-1").symlink_to("/dev/null")
    monkeypatch.setattr(dl, "BY_ID", tmp_path)
    permission, name = dl.check_port("/dev/null")
    assert permission.verdict is Verdict.OK
    assert name.verdict is Verdict.ATTENTION
    assert str(tmp_path / "usb-board-1") in name.remedy
    assert len(list(dl.check_port(str(tmp_path / "usb-board-1")))) == 1


@contextmanager
def board(eeprom: Eeprom) -> Iterator[str]:
    """A stand-in on a pseudo-terminal, its time going on with what it is asked."""
    master, slave = pty.openpty()
    tty.setraw(master)
    tty.setraw(slave)
    made, end = StandIn(demo(), 1, eeprom=eeprom), threading.Event()

    def live() -> None:
        os.set_blocking(master, False)
        tick = 0
        while not end.is_set():
            try:
                made.feed(os.read(master, 4096))
            except (BlockingIOError, OSError):
                end.wait(0.002)
            tick += 20
            made.advance_to(tick)
            data = made.take_output()
            if data:
                with suppress(BlockingIOError):  # nobody reads
                    os.write(master, data)

    thread = threading.Thread(target=live)
    thread.start()
    try:
        yield os.ttyname(slave)
    finally:
        end.set()
        thread.join()
        os.close(slave)
        os.close(master)


def test_a_board_is_greeted_and_its_settings_compared() -> None:
    """Firmware, boot, what is latched; settings that agree."""
    with board(Eeprom(BENCH.settings())) as device:
        checks = {check.name: check for check in dl.check_board(BENCH, device)}
    assert checks["board"].found.startswith("standin-demo, boot 1, 1000 pairs/s")
    assert checks["latched"].found == "restarted"
    assert checks["settings"].verdict is Verdict.OK


def test_settings_that_differ_or_are_blank_are_faults() -> None:
    """Both values are named; a blank board is to be commissioned."""
    other = replace(BENCH, v_max=20e3)
    with board(Eeprom(BENCH.settings())) as device:
        checks = {check.name: check for check in dl.check_board(other, device)}
    assert checks["settings"].verdict is Verdict.FAULT
    assert "in the MCU" in checks["settings"].found
    with board(Eeprom()) as device:
        checks = {check.name: check for check in dl.check_board(BENCH, device)}
    assert checks["settings"].text.startswith("fault      settings: blank or damaged")


def test_a_line_on_which_nobody_greets(monkeypatch: pytest.MonkeyPatch) -> None:
    """Silence, a closed line and a port that cannot be opened are told apart."""
    monkeypatch.setattr(dl, "GREET_S", 0.1)
    monkeypatch.setattr(dl, "POLL_S", 0.01)
    master, slave = pty.openpty()
    name = os.ttyname(slave)
    assert one(dl.check_board(BENCH, name)).name == "board"
    os.close(slave)
    os.close(master)
    assert one(dl.check_board(BENCH, name)).name == "port"


@contextmanager
def listener() -> Iterator[int]:
    """A port of this machine that accepts and then closes."""
    with socket.create_server(("127.0.0.1", 0)) as server:
        def accept() -> None:
            try:
                server.accept()[0].close()
            except OSError:
                return

        thread = threading.Thread(target=accept)
        thread.start()
        yield server.getsockname()[1]
        server.close()
        thread.join(10.0)


def broker(port: int, **more: object) -> dl.Bench:
    """The bench with a broker on this port."""
    block = MqttBlock.model_validate({"host": "127.0.0.1", "port": str(port), "tls": "no", **more})
    return replace(BENCH, broker=broker_of(block, "demo"))


def test_a_broker_that_accepts_one_that_is_gone_and_one_without_tls() -> None:
    """A missing broker never hinders the bench."""
    assert list(dl.check_broker(BENCH)) == []
    with listener() as port:
        assert one(dl.check_broker(broker(port))).verdict is Verdict.OK
    assert one(dl.check_broker(broker(port))).verdict is Verdict.ATTENTION
    with listener() as port:
        found = one(dl.check_broker(broker(port, tls="yes")))
    assert found.verdict is Verdict.ATTENTION


def test_a_certificate_that_is_not_to_be_trusted_is_told(monkeypatch: pytest.MonkeyPatch) -> None:
    """Verification is on; its reason is given."""

    def refuse(self: ssl.SSLContext, line: socket.socket, server_hostname: str) -> ssl.SSLSocket:
        assert self.verify_mode is ssl.CERT_REQUIRED
        assert self.check_hostname
        raise ssl.SSLCertVerificationError(1, "certificate verify failed")

    monkeypatch.setattr(ssl.SSLContext, "wrap_socket", refuse)
    with listener() as port:
        found = one(dl.check_broker(broker(port, tls="yes")))
    assert "certificate" in found.text


def test_a_password_that_others_may_read_is_told(tmp_path: Path) -> None:
    """Absent, open to others, private."""
    path = tmp_path / "secret"
    with listener() as port:
        bench = broker(port, user="u", password_file=str(path))
        assert [check.verdict for check in dl.check_broker(bench)][-1] is Verdict.FAULT
    path.write_text("secret")
    for mode, verdict in ((0o644, Verdict.ATTENTION), (0o600, Verdict.OK)):
        path.chmod(mode)
        found = dl._password_file(path)
        assert found.verdict is verdict
        assert "secret:" not in found.found.partition(str(path))[2]
