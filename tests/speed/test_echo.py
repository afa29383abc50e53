"""The bare twins: a cut for whatever comes, on every path."""

import os
import pty
import socket
import subprocess
import sys
import tty
from pathlib import Path

import pytest

from hvhost.speed.echo import CUT


@pytest.mark.parametrize("kind", ["unix", "tcp"])
def test_a_cut_is_written_for_whatever_comes(kind: str, tmp_path: Path) -> None:
    """One read, one cut; a key goes the same way through a process of its own."""
    master, slave = pty.openpty()
    tty.setraw(slave)
    path = str(tmp_path / "e.sock")
    twin = _child([os.ttyname(slave), kind, *([path] if kind == "unix" else [])])
    try:
        assert twin.stdout is not None
        word = twin.stdout.readline().decode().strip()
        if kind == "tcp":
            with socket.create_connection(("127.0.0.1", int(word))) as line:
                line.sendall(b"OUTP OFF\n")
                assert os.read(master, 100) == CUT
        else:
            keys, terminal = pty.openpty()
            key = _child(["none", "key", path], stdin=terminal)
            assert key.stdout is not None
            assert key.stdout.readline() == b"ready\n"
            os.write(keys, b"c")
            assert os.read(master, 100) == CUT
            _end(key)
            os.close(keys)
            os.close(terminal)
    finally:
        _end(twin)
    os.close(master)
    os.close(slave)


def _child(arguments: list[str], stdin: int = subprocess.DEVNULL) -> "subprocess.Popen[bytes]":
    return subprocess.Popen([sys.executable, "-m", "hvhost.speed.echo", *arguments], stdin=stdin,
                            stdout=subprocess.PIPE)


def _end(child: "subprocess.Popen[bytes]") -> None:
    child.terminate()
    child.wait()
    assert child.stdout is not None
    child.stdout.close()
