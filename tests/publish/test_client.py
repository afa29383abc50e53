"""The synchronous client: answers, errors of ours, and what it says when the daemon is not there."""

import socket
import subprocess
import sys
import threading
from dataclasses import replace
from pathlib import Path

import pytest

from hvhost.publish.client import Client
from hvhost.words.errors import CannotConnect, CommandRefused, FileFault, HvhostError, RecordFault
from tests.pictures.states import RUNNING
from tests.publish.serving import served


def test_a_call_returns_the_result(tmp_path: Path) -> None:
    """What the daemon's handler returns is what the caller gets."""
    with served(tmp_path) as bench, Client.connect(bench.path) as client:
        assert client.call("lower") == {"text": "lowering"}
        assert bench.asked == [("lower", {})]


def test_a_refusal_is_raised_as_what_it_was(tmp_path: Path) -> None:
    """The error's class and four parts survive the socket."""
    with served(tmp_path) as bench, Client.connect(bench.path) as client:
        bench.answers["arm"] = CommandRefused("interlock closed", "open", "bench", "close it")
        bench.answers["record"] = RecordFault("a disk with room", "full")
        bench.answers["run"] = FileFault("a plan", findings=("p.yaml:4: refuse: hold",))
        bench.answers["broken"] = ZeroDivisionError("oops")
        with pytest.raises(CommandRefused, match="bench: expected interlock closed, found open; close it"):
            client.call("arm")
        with pytest.raises(RecordFault):
            client.call("record")
        with pytest.raises(FileFault) as caught:
            client.call("run")
        assert caught.value.findings == ("p.yaml:4: refuse: hold",)
        with pytest.raises(CommandRefused, match="fault of ours"):
            client.call("broken")


def test_notifications_between_request_and_answer_are_kept(tmp_path: Path) -> None:
    """A subscriber that asks something misses no snapshot."""
    with served(tmp_path) as bench, Client.connect(bench.path) as client:
        client.call("subscribe", {"rate_hz": 20})
        bench.publish(replace(RUNNING, now_s=1.0))
        assert client.call("lower") == {"text": "lowering"}
        first = client.notification()
        assert first is not None
        assert first["params"]["whole"] is True
        assert client.notification(0.0) is None


def test_no_daemon_is_a_sentence_with_a_remedy(tmp_path: Path) -> None:
    """Missing and stale sockets name what to do; nothing shows a traceback."""
    with pytest.raises(CannotConnect) as missing:
        Client.connect(str(tmp_path / "none.sock"))
    assert "hvhost serve" in missing.value.remedy
    with socket.socket(socket.AF_UNIX) as dead:
        dead.bind(str(tmp_path / "dead.sock"))
    with pytest.raises(CannotConnect, match="found none"):
        Client.connect(str(tmp_path / "dead.sock"))


def test_a_daemon_that_goes_away_is_told(tmp_path: Path) -> None:
    """The caller learns of it at once and is pointed to the emergency switching off."""
    with served(tmp_path) as bench:
        client = Client.connect(bench.path)
        client.call("lower")
    with client:
        with pytest.raises(CannotConnect, match="emergency switching off"):
            client.call("lower")
        with pytest.raises(CannotConnect):
            client.notification(1.0)


def test_a_daemon_that_does_not_answer_is_told(tmp_path: Path) -> None:
    """A wait ends: no answer in time is an error, not a hang."""
    path = str(tmp_path / "mute.sock")
    with socket.socket(socket.AF_UNIX) as mute:
        mute.bind(path)
        mute.listen()
        with Client.connect(path) as client, pytest.raises(CannotConnect, match="in time"):
            client.call("cut", timeout_s=0.01)


@pytest.mark.parametrize("answer", [b"hello\n", b"[1]\n", b"\xff\n"])
def test_an_answer_that_is_none_is_told(tmp_path: Path, answer: bytes) -> None:
    """Something else on that socket is named as such."""
    path = str(tmp_path / "odd.sock")
    with socket.socket(socket.AF_UNIX) as odd:
        odd.bind(path)
        odd.listen()

        def reply() -> None:
            connection, _ = odd.accept()
            with connection:
                connection.recv(1000)
                connection.sendall(answer)
                connection.recv(1000)

        thread = threading.Thread(target=reply, daemon=True)
        thread.start()
        with Client.connect(path) as client, pytest.raises(HvhostError):
            client.call("status")
        thread.join(5.0)


def test_the_stop_path_imports_nothing_heavy() -> None:
    """A stop's start-up time is spent on argparse, json and socket only (B11)."""
    heavy = ("asyncio", "numpy", "rich", "yaml", "serial", "pydantic", "pyarrow", "dataclasses",
             "inspect")
    code = ("import sys; before = set(sys.modules); import hvhost.cli.cut, hvhost.cli.lower; "
            f"print(sorted(m for m in set(sys.modules) - before if m.split('.')[0] in {heavy!r}))")
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True, timeout=60)
    assert done.stdout.strip() == "[]"
