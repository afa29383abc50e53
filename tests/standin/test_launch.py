"""The stand-in as a process: what it prints, takes, writes and leaves behind."""

import argparse
import json
import os
import socket
import subprocess
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest

from hvhost.standin.launch import add_arguments, run_standin
from hvhost.wire.frames import Block, decode_received
from hvhost.wire.lines import LineReader, seal
from hvhost.words.errors import CannotConnect, HvhostError, UsageFault

MAIN = ("import argparse, sys\n"
        "from hvhost.standin.launch import add_arguments, run_standin\n"
        "parser = argparse.ArgumentParser()\n"
        "add_arguments(parser)\n"
        "sys.exit(run_standin(parser.parse_args()))\n")


def parsed(*words: str) -> argparse.Namespace:
    """Arguments as the command reads them."""
    parser = argparse.ArgumentParser()
    add_arguments(parser)
    return parser.parse_args(words)


@contextmanager
def running(folder: Path, *words: str) -> Iterator[tuple["subprocess.Popen[str]", dict[str, list[str]]]]:
    """A stand-in in its own process with a control socket, and what it printed first."""
    command = [sys.executable, "-c", MAIN, "--control", str(folder / "c"), *words]
    with subprocess.Popen(command, stdout=subprocess.PIPE, stdin=subprocess.DEVNULL, text=True) as process:
        assert process.stdout is not None
        told: dict[str, list[str]] = {}
        for line in process.stdout:
            word, _, rest = line.strip().partition(" ")
            told.setdefault(word, []).append(rest)
            if word == ("truth" if "--truth" in words else "control"):
                break
        try:
            yield process, told
        finally:
            process.terminate()
            process.wait(20)


@contextmanager
def control(folder: Path) -> Iterator[socket.socket]:
    """A client of the control socket, once it listens."""
    with socket.socket(socket.AF_UNIX) as client:
        client.settimeout(20)
        for _ in range(100_000):
            if client.connect_ex(str(folder / "c")) == 0:
                break
        yield client


def say(client: socket.socket, line: str) -> str:
    """One command, one answer."""
    client.sendall(f"{line}\n".encode())
    answer = b""
    while not answer.endswith(b"\n"):
        answer += client.recv(4096)
    return answer.decode().strip()


def test_process_serves_and_leaves_nothing(tmp_path: Path) -> None:
    """Seed first, then the device; a host is greeted on it; quit ends with 0, the socket is gone, the truth is JSON."""
    truth = tmp_path / "truth.jsonl"
    with running(tmp_path, "--seed", "7", "--factory", "--truth", str(truth), "--fault", "lead-off") as (process, told):
        assert list(told) == ["seed", "port", "control", "truth"]
        assert told["seed"] == ["7"]
        with control(tmp_path) as client:
            assert json.loads(say(client, "status").removeprefix("ok "))["mcu"] == 0
            fd = os.open(told["port"][0], os.O_RDWR | os.O_NOCTTY)
            os.write(fd, seal(b"hello 0 0000ABCD 1 500"))
            reader, bodies = LineReader(), []
            while not any(isinstance(body, bytes) and isinstance(decode_received(body, "ss"), Block)
                          for body in bodies):
                bodies += reader.feed(os.read(fd, 4096))
            assert b"ok 0 hello 1 500" in bodies
            os.close(fd)
            assert say(client, "quit") == "ok quit"
        assert process.wait(20) == 0
    assert not (tmp_path / "c").exists()
    lines = [json.loads(line) for line in truth.read_text().splitlines()]
    assert lines[0] == {"kind": "start", "seed": 7, "profile": "demo", "tick_hz": 10_000, "faults": ["lead-off"]}
    assert {"state", "event"} <= {line["kind"] for line in lines}


def test_several_side_by_side_have_their_own_lines_and_files(tmp_path: Path) -> None:
    """Two devices and a TCP port are three benches; a terminated process leaves no socket."""
    with running(tmp_path, "--seed", "1", "--pty", "2", "--tcp", "127.0.0.1:0", "--eeprom", str(tmp_path / "e"),
                 "--truth", str(tmp_path / "t")) as (process, told):
        assert len(set(told["port"])) == 3
        with control(tmp_path) as client:
            assert say(client, "3 interlock open") == "ok interlock open"
            seen = [json.loads(say(client, f"{n} status").removeprefix("ok "))["inputs"] & 1 for n in (1, 2, 3)]
            assert seen == [1, 1, 0]
        process.terminate()
        assert process.wait(20) == 0
    assert sorted(path.name for path in tmp_path.iterdir()) == ["e", "e.2", "e.3", "t", "t.2", "t.3"]


@pytest.mark.parametrize(("words", "error", "hint"), [
    (("--fault", "gremlin"), UsageFault, "fault"), (("--set", "cable_f=1"), UsageFault, "capacitance"),
    (("--tcp", "nowhere"), UsageFault, "HOST:PORT"), (("--tcp", "192.0.2.1:0"), CannotConnect, "address"),
    (("--pty", "99"), UsageFault, "side by side"), (("--truth", "/nonexistent/t"), UsageFault, "cannot write"),
    (("--control", "/nonexistent/c"), CannotConnect, "cannot listen")])
def test_wrong_arguments_are_refused_with_a_sentence(words: tuple[str, ...], error: type[HvhostError],
                                                     hint: str) -> None:
    """Nothing runs; the sentence says what to mend."""
    with pytest.raises(error, match=hint):
        run_standin(parsed(*words))


def test_help_lists_every_fault_and_command() -> None:
    """A line each."""
    parser = argparse.ArgumentParser()
    add_arguments(parser)
    text = parser.format_help()
    assert "\n  lead-off " in text
    assert "\n  reset-outside:" in text
