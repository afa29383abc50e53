"""Snapshots are fetched part by part, given up aloud, and confirmed by nobody here."""

from typing import Any

import pytest

from hvhost.supervisor.evidence import Evidence
from hvhost.wire.blocks import pack_codes
from hvhost.wire.frames import Ok, Refusal, Snap
from hvhost.wire.vocabulary import Err


class Link:
    """Keeps requests."""

    def __init__(self) -> None:
        self.asked: list[Snap] = []

    def request(self, frame: Snap) -> int:
        """Take one."""
        self.asked.append(frame)
        return len(self.asked)


class Info:
    """Signs only."""

    signs = "ss"


class Greeting:
    """Info only."""

    info = Info()


class Host:
    """As much of a core as evidence needs."""

    def __init__(self) -> None:
        self.link, self.greeting = Link(), Greeting()
        self.said: list[str] = []
        self.noted: list[str] = []

    def say(self, now_s: float, severity: str, text: str) -> None:
        """Keep it."""
        self.said.append(text)

    def note(self, now_s: float, what: str, **data: Any) -> None:
        """Keep it."""
        self.noted.append(what)


def part(offset: int, pairs: int, total: int = 50, number: int = 7) -> Ok:
    """An answer with these pairs."""
    codes = [c for at in range(offset, offset + pairs) for c in (at, -at)]
    text = pack_codes(codes, "ss").decode("ascii")
    return Ok(n=1, verb="snap", words=(str(number), "trip", "0000ABCD", str(offset), str(total), "20", "1000", "0",
                                       str(pairs), text), pairs={})


def test_parts_are_asked_for_until_the_whole_is_there() -> None:
    """Codes in order, ready for the shell, still to be stored."""
    host, evidence = Host(), Evidence()
    evidence.begin(host, 7)  # type: ignore[arg-type]
    evidence.begin(host, 7)  # type: ignore[arg-type]
    evidence.part(host, part(0, 40), 0.0)  # type: ignore[arg-type]
    evidence.part(host, part(40, 10), 0.0)  # type: ignore[arg-type]
    assert [frame.offset for frame in host.link.asked] == [0, 40]
    [snapshot] = evidence.take()
    assert snapshot.codes == tuple(c for at in range(50) for c in (at, -at))
    assert (snapshot.tag, snapshot.trigger, snapshot.index) == (0xABCD, 20, 1000)
    assert evidence.fetching
    evidence.stored()
    assert not evidence.fetching


@pytest.mark.parametrize("answer", [
    Refusal(n=1, verb="snap", code=Err.NOTHING), part(3, 40), part(0, 40, number=8), part(0, 40, total=20),
    part(0, 40, total=100_000), Ok(n=1, verb="snap", words=("7", "trip"), pairs={})])
def test_what_does_not_fit_is_given_up_aloud(answer: Ok | Refusal) -> None:
    """The MCU keeps it; nothing waits for ever."""
    host, evidence = Host(), Evidence()
    evidence.begin(host, 7)  # type: ignore[arg-type]
    evidence.part(host, answer, 0.0)  # type: ignore[arg-type]
    assert not evidence.fetching
    assert evidence.take() == []
    assert "the MCU keeps it" in host.said[-1]


def test_a_new_session_fetches_the_same_snapshot_anew() -> None:
    """Half of it was fetched when the link was lost."""
    host, evidence = Host(), Evidence()
    evidence.begin(host, 7)  # type: ignore[arg-type]
    evidence.part(host, part(0, 40), 0.0)  # type: ignore[arg-type]
    evidence.forget()
    assert not evidence.fetching
    evidence.begin(host, 7)  # type: ignore[arg-type]
    assert [frame.offset for frame in host.link.asked] == [0, 40, 0]
