"""Where the control socket lives."""

import socket
from pathlib import Path

import pytest

from hvhost.publish.places import chosen_sockets, one_socket, socket_folder, socket_path
from hvhost.words.errors import CannotConnect, CommandRefused


def listen(path: Path) -> socket.socket:
    """Make a socket file."""
    path.parent.mkdir(parents=True, exist_ok=True)
    made = socket.socket(socket.AF_UNIX)
    made.bind(str(path))
    return made


def test_the_runtime_folder_is_preferred() -> None:
    """XDG base directories: the runtime folder where there is one, else the state folder."""
    assert socket_path("demo", environ={"XDG_RUNTIME_DIR": "/run/user/7"}) == "/run/user/7/hvhost/demo.sock"
    assert socket_path("demo", environ={"HOME": "/home/bob"}) == "/home/bob/.local/state/hvhost/demo.sock"
    assert socket_folder({"XDG_RUNTIME_DIR": "relative", "HOME": "/h"}) == "/h/.local/state/hvhost"


def test_option_beats_environment_beats_folder() -> None:
    """The more deliberate a choice, the more it counts."""
    env = {"HVHOST_SOCKET": "/tmp/env.sock", "HOME": "/h"}
    assert socket_path("demo", "/tmp/opt.sock", env) == "/tmp/opt.sock"
    assert socket_path("demo", environ=env) == "/tmp/env.sock"
    assert chosen_sockets("", env) == ("/tmp/env.sock",)


@pytest.mark.parametrize("name", ["", "a/b", "..", ".hidden", "two words", "x" * 61, "naïve"])
def test_a_name_unfit_for_a_file_is_refused(name: str) -> None:
    """A bench's name never becomes a path elsewhere."""
    with pytest.raises(CommandRefused):
        socket_path(name, environ={"HOME": "/h"})


def test_a_path_too_long_for_a_socket_is_refused() -> None:
    """Linux takes 107 bytes (unix(7)); the remedy names the option."""
    with pytest.raises(CannotConnect) as caught:
        socket_path("demo", "/" + "x" * 107, {})
    assert "--socket" in caught.value.remedy


def test_a_client_finds_the_only_bench(tmp_path: Path) -> None:
    """With one daemon here nobody has to name it."""
    env = {"XDG_RUNTIME_DIR": str(tmp_path)}
    with pytest.raises(CannotConnect) as caught:
        chosen_sockets("", env)
    assert "serve" in caught.value.remedy
    (tmp_path / "hvhost").mkdir()
    (tmp_path / "hvhost" / "note.sock").write_text("no socket")
    with listen(tmp_path / "hvhost" / "a.sock"):
        assert one_socket("", env) == str(tmp_path / "hvhost" / "a.sock")


def test_with_several_benches_one_must_be_named(tmp_path: Path) -> None:
    """A command that needs one bench asks which; a bench's name is enough."""
    env = {"XDG_RUNTIME_DIR": str(tmp_path)}
    with listen(tmp_path / "hvhost" / "a.sock"), listen(tmp_path / "hvhost" / "b.sock"):
        assert len(chosen_sockets("", env)) == 2
        with pytest.raises(CannotConnect, match="2: a, b"):
            one_socket("", env)
        assert one_socket("b", env) == str(tmp_path / "hvhost" / "b.sock")
