"""The stop keys: sent at once, on a connection of their own, told what became of them."""

import threading
import time
from pathlib import Path

import pytest

from hvhost.publish.conversation import Later
from hvhost.publish.stopkeys import ANSWER_S, NOTE_S, Stopper
from tests.publish.serving import served


def until_told(stopper: Stopper, start: str) -> str:
    """Return the note once it begins so."""
    until_s = time.monotonic() + 20.0
    while time.monotonic() < until_s:
        if (note := stopper.note(1.0)).startswith(start):
            return note
    raise AssertionError(note)


@pytest.mark.parametrize("verb", ["cut", "lower"])
def test_a_key_stops_and_tells_the_answer(tmp_path: Path, verb: str) -> None:
    """The daemon gets the stop; the view says first that it was sent, then what was answered."""
    with served(tmp_path) as bench:
        stopper = Stopper(bench.path)
        stopper.prepare()
        stopper.press(verb, 1.0)
        start = f"{verb} sent by this key: "
        assert until_told(stopper, start) == f"{start}{bench.answers[verb]['text']}"
        assert bench.asked == [(verb, {})]
        assert stopper.note(1.0 + NOTE_S) == ""
        stopper.close()


@pytest.mark.parametrize(("result", "words"), [({"number": 12}, "taken by the daemon as number 12"),
                                               ({}, "taken by the daemon"), (None, "taken by the daemon")])
def test_an_answer_without_words_is_told_by_its_number(tmp_path: Path, result: object, words: str) -> None:
    """The stop's number is the one that the record and the MCU name."""
    with served(tmp_path) as bench:
        stopper = Stopper(bench.path)
        bench.answers["cut"] = result
        stopper.press("cut", 1.0)
        assert until_told(stopper, "cut sent by this key: ") == f"cut sent by this key: {words}"
        stopper.close()


def test_a_lost_connection_is_made_anew(tmp_path: Path) -> None:
    """A daemon that was started again gets the stop."""
    with served(tmp_path) as bench:
        stopper = Stopper(bench.path)
        stopper.prepare()
    with served(tmp_path) as bench:
        stopper.press("cut", 1.0)
        stopper.press("lower", 1.0)
        until_told(stopper, "lower sent by this key: ")
        assert [method for method, _ in bench.asked] == ["cut", "lower"]
        stopper.close()


def test_without_a_daemon_the_key_says_what_to_do(tmp_path: Path) -> None:
    """A stop that cannot be sent points to the emergency switching off."""
    stopper = Stopper(str(tmp_path / "none.sock"))
    stopper.prepare()
    stopper.press("cut", 1.0)
    assert stopper.note(1.0) == "CUT NOT SENT, no daemon answers (none): use the emergency switching off"


def test_a_daemon_that_dies_before_answering_is_told(tmp_path: Path) -> None:
    """A stop without an answer is not called done."""
    with served(tmp_path) as bench:
        stopper = Stopper(bench.path)
        bench.answers["cut"] = Later()
        came = threading.Event()
        bench.on_call = lambda method: came.set()
        stopper.press("cut", 1.0)
        assert came.wait(20.0)
    assert until_told(stopper, "cut sent by this key, NOT") == (
        "cut sent by this key, NOT ANSWERED: use the emergency switching off")


def test_a_refused_stop_is_told(tmp_path: Path) -> None:
    """A stop that the daemon could not carry out says why."""
    with served(tmp_path) as bench:
        stopper = Stopper(bench.path)
        del bench.answers["lower"]
        stopper.press("lower", 1.0)
        assert "refused" in until_told(stopper, "lower sent by this key: ")
        stopper.close()


def test_a_stalled_daemon_is_told_after_a_second(tmp_path: Path) -> None:
    """A stop that nobody answers is called unanswered, not sent."""
    with served(tmp_path) as bench:
        stopper = Stopper(bench.path)
        bench.answers["lower"] = Later()
        stopper.press("lower", 1.0)
        assert stopper.note(1.5) == "lower sent by this key, not answered yet"
        assert stopper.note(1.0 + ANSWER_S + 0.1) == (
            "lower sent by this key, NOT ANSWERED: use the emergency switching off")
