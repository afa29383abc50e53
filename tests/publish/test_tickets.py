"""The kept ticket: of this user alone."""

import os
from pathlib import Path

import pytest

from hvhost.publish.tickets import read_ticket, ticket_file, write_ticket


def test_a_ticket_is_kept_for_its_user_alone(tmp_path: Path) -> None:
    """It stands beside the socket, readable by nobody else, and is replaced whole."""
    socket = str(tmp_path / "demo.sock")
    assert read_ticket(socket) == ""
    write_ticket(socket, "first")
    write_ticket(socket, "second")
    assert read_ticket(socket) == "second"
    assert ticket_file(socket).stat().st_mode & 0o777 == 0o600


def test_a_ticket_that_others_could_read_or_write_is_not_used(tmp_path: Path) -> None:
    """Somebody else's file, or one with open permissions, proves nothing."""
    socket = str(tmp_path / "demo.sock")
    write_ticket(socket, "x")
    ticket_file(socket).chmod(0o644)
    assert read_ticket(socket) == ""


def test_a_file_that_is_there_already_is_not_written_through(tmp_path: Path) -> None:
    """A link that somebody laid is removed, not followed."""
    socket = str(tmp_path / "demo.sock")
    victim = tmp_path / "victim"
    victim.write_text("keep")
    os.symlink(victim, ticket_file(socket))
    write_ticket(socket, "x")
    assert victim.read_text() == "keep"
    assert not ticket_file(socket).is_symlink()


@pytest.mark.parametrize("data", [b"\xff\xfe", b""])
def test_rubbish_is_no_ticket(tmp_path: Path, data: bytes) -> None:
    """What cannot be read is as if it were not there."""
    socket = str(tmp_path / "demo.sock")
    write_ticket(socket, "x")
    ticket_file(socket).write_bytes(data)
    assert read_ticket(socket) == ""
