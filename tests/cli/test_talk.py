"""What the commands share: names, the seat's ticket, the line of state."""

import argparse
import getpass
import os
from pathlib import Path

import pytest

from hvhost.cli.talk import Bench, parser_of, state_line, who_of
from hvhost.publish.tickets import read_ticket, ticket_file, write_ticket
from hvhost.words.errors import CommandRefused
from tests.publish.serving import served


def test_the_name_is_the_one_given_or_the_user_s(monkeypatch: pytest.MonkeyPatch) -> None:
    """``--as`` beats the login name; a system without names gives the number."""
    parser = parser_of("x", "about")
    assert who_of(parser.parse_args(["--as", "second operator"])) == "second operator"
    assert who_of(parser.parse_args([])) == getpass.getuser()
    monkeypatch.setattr(getpass, "getuser", lambda: {}["nobody"])
    assert who_of(parser.parse_args([])) == f"uid {os.getuid()}"


def test_a_ticket_is_kept_for_its_user_alone(tmp_path: Path) -> None:
    """Readable by its owner only; one that others may read, or rubbish, counts as none."""
    socket = str(tmp_path / "x.sock")
    assert read_ticket(socket) == ""
    write_ticket(socket, "abc")
    write_ticket(socket, "abcd")  # again, over the old one
    assert ticket_file(socket).stat().st_mode & 0o077 == 0
    assert read_ticket(socket) == "abcd"
    ticket_file(socket).chmod(0o644)
    assert read_ticket(socket) == ""
    ticket_file(socket).chmod(0o600)
    ticket_file(socket).write_bytes(b"\xff\xfe")
    assert read_ticket(socket) == ""


def test_a_link_is_not_followed_when_a_ticket_is_written(tmp_path: Path) -> None:
    """Whoever planted a link gets nothing written through it."""
    socket, other = str(tmp_path / "x.sock"), tmp_path / "other"
    ticket_file(socket).symlink_to(other)
    write_ticket(socket, "abc")
    assert not other.exists()


def test_a_kept_ticket_is_used_while_it_holds(tmp_path: Path) -> None:
    """The ticket of this user's ``hvhost seat`` is used; one that no longer holds is replaced by a seat of its own."""
    with served(tmp_path) as fake:
        options = argparse.Namespace(socket=fake.path, who="me")
        write_ticket(fake.path, "kept")
        fake.answers.update({"seat.check": {"holder": "me"}, "seat.take": {"ticket": "new"}})
        with Bench(options) as bench:
            bench.take_seat()
            assert bench.ticket == "kept"
        fake.answers["seat.check"] = CommandRefused("control of the bench", "nobody has it", "seat")
        with Bench(options) as bench:
            bench.take_seat()
            assert bench.ticket == "new"


@pytest.mark.parametrize(("snapshot", "words"), [
    ({"link": "greeted", "permission": "idle", "voltage": "unknown"},
     "output unknown - use the emergency switching off"),
    ({"link": "greeted", "permission": "running", "phase": "hold", "polarity": -1,
      "reading": {"volts": 8000.0, "amps": 1e-3}, "voltage": "present"}, "hold; -8.000 kV -1.0000 mA"),
    ({"permission": "pausing", "pause_s": 2.04, "voltage": "present"}, "WILL RE-ENERGISE in 2.0 s"),
    ({"permission": "warning", "warning_s": 1.5, "voltage": "present"}, "energises in 1.5 s"),
    ({"permission": "idle", "latched": ["breakdown", "host silent"], "voltage": "falling"},
     "latched: breakdown, host silent"),
    ({"permission": "idle", "stop": "cut not confirmed: use the emergency switching off", "voltage": "unknown"},
     "cut not confirmed: use the emergency switching off"),
])
def test_the_line_of_state(snapshot: dict[str, object], words: str) -> None:
    """It names what matters; a reading that may not be shown is never a number."""
    assert words in state_line(snapshot)
