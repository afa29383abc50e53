"""A pseudo-terminal that came back under its old name may be somebody's shell: looked at, and not touched."""

import os
import termios
import tty
from pathlib import Path

from hvhost.ports.terminals import is_pseudo_terminal, may_reopen, stands_raw


def test_a_raw_line_may_be_opened_again() -> None:
    """A stand-in leaves its line raw."""
    master, slave = os.openpty()
    tty.setraw(slave)
    path = os.ttyname(slave)
    assert is_pseudo_terminal(path)
    assert stands_raw(path)
    assert may_reopen(path)
    os.close(master)
    os.close(slave)


def test_a_terminal_in_use_is_left_alone() -> None:
    """A terminal as a shell has it is not opened, and its settings stay as they are."""
    master, slave = os.openpty()
    before = termios.tcgetattr(slave)
    assert not may_reopen(os.ttyname(slave))
    assert termios.tcgetattr(slave) == before
    os.close(master)
    os.close(slave)


def test_a_link_is_followed(tmp_path: Path) -> None:
    """What counts is where the path leads now."""
    master, slave = os.openpty()
    link = tmp_path / "board"
    link.symlink_to(os.ttyname(slave))
    assert is_pseudo_terminal(str(link))
    assert not may_reopen(str(link))
    os.close(master)
    os.close(slave)


def test_anything_else_is_no_concern(tmp_path: Path) -> None:
    """Serial devices, TCP servers and paths that are not there may be tried."""
    for path in ("/dev/null", "tcp:127.0.0.1:1", str(tmp_path / "none")):
        assert not is_pseudo_terminal(path)
        assert may_reopen(path)
    assert not stands_raw(str(tmp_path / "none"))
    assert not stands_raw("/dev/null")
