"""Making the socket file: private, one daemon, stale files removed, nothing else touched."""

import os
import socket
import stat
from pathlib import Path

import pytest

from hvhost.publish.listening import ListeningSocket
from hvhost.words.errors import CannotConnect


def test_the_socket_is_private(tmp_path: Path) -> None:
    """Only the owner reaches the bench: mode 0600 in a folder of mode 0700, whatever the umask."""
    path = tmp_path / "hv" / "demo.sock"
    before = os.umask(0)
    try:
        with ListeningSocket(str(path)):
            assert stat.S_IMODE(path.stat().st_mode) == 0o600
            assert stat.S_IMODE(path.parent.stat().st_mode) == 0o700
    finally:
        os.umask(before)
    assert os.listdir(path.parent) == []


def test_a_second_daemon_is_refused(tmp_path: Path) -> None:
    """Two daemons on one bench would fight over one supply."""
    path = str(tmp_path / "demo.sock")
    with ListeningSocket(path) as first:
        with pytest.raises(CannotConnect, match="no other daemon on this bench"):
            ListeningSocket(path)
        with socket.socket(socket.AF_UNIX) as client:
            client.connect(path)
        first.close()
    ListeningSocket(path).close()


def test_a_daemon_without_a_lock_is_respected(tmp_path: Path) -> None:
    """A socket that answers is not stale, even where its lock file was deleted."""
    path = tmp_path / "demo.sock"
    with ListeningSocket(str(path)):
        os.unlink(f"{path}.lock")
        with pytest.raises(CannotConnect, match="one that answers"):
            ListeningSocket(str(path))
        assert path.exists()


def test_a_stale_socket_is_replaced(tmp_path: Path) -> None:
    """What a killed daemon left behind does not keep the next one out."""
    path = tmp_path / "demo.sock"
    with socket.socket(socket.AF_UNIX) as dead:
        dead.bind(str(path))
    with ListeningSocket(str(path)), socket.socket(socket.AF_UNIX) as client:
        assert client.connect_ex(str(path)) == 0


def test_a_file_that_is_no_socket_is_left_alone(tmp_path: Path) -> None:
    """Nobody's data is removed for a socket."""
    path = tmp_path / "demo.sock"
    path.write_text("notes")
    with pytest.raises(CannotConnect, match="another kind"):
        ListeningSocket(str(path))
    assert path.read_text() == "notes"


def test_a_folder_that_cannot_be_made_is_named(tmp_path: Path) -> None:
    """A missing place is a sentence with a remedy."""
    (tmp_path / "file").write_text("")
    with pytest.raises(CannotConnect) as caught:
        ListeningSocket(str(tmp_path / "file" / "demo.sock"))
    assert "--socket" in caught.value.remedy


def test_a_path_too_long_is_named(tmp_path: Path) -> None:
    """The kernel's refusal becomes a sentence."""
    with pytest.raises(CannotConnect, match="socket file that can be made"):
        ListeningSocket(str(tmp_path / ("x" * 120)))


def test_another_daemons_socket_is_not_removed_on_closing(tmp_path: Path) -> None:
    """Closing removes only the file that was made here; closing twice does nothing."""
    path = tmp_path / "demo.sock"
    ours = ListeningSocket(str(path))
    os.unlink(path)
    with socket.socket(socket.AF_UNIX) as other:
        other.bind(str(path))
        ours.close()
        ours.close()
        assert path.exists()
