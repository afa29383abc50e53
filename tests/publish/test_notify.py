"""Telling the service manager: what is sent, that it never waits, and what feeds the watchdog."""

import os
import socket
from collections.abc import Iterator
from itertools import pairwise
from pathlib import Path

import pytest

from hvhost.publish.notify import FEEDS, STATUS_MAX, Notifier, Watchdog, one_line


class Manager:
    """A fake service manager: a datagram socket and what came to it."""

    def __init__(self, address: str) -> None:
        self.socket = socket.socket(socket.AF_UNIX, socket.SOCK_DGRAM | socket.SOCK_NONBLOCK)
        self.socket.bind("\0" + address[1:] if address.startswith("@") else address)

    def taken(self) -> list[str]:
        """Every message so far."""
        found = []
        try:
            while True:
                found.append(self.socket.recv(4096).decode())
        except BlockingIOError:
            return found


@pytest.fixture
def manager(tmp_path: Path) -> Iterator[Manager]:
    """One on a path of its own."""
    made = Manager(str(tmp_path / "notify"))
    yield made
    made.socket.close()


@pytest.fixture
def notifier(manager: Manager, tmp_path: Path) -> Iterator[Notifier]:
    """A notifier of that manager, with a watchdog of 4 s."""
    made = Notifier(str(tmp_path / "notify"), 4.0)
    yield made
    made.close()


def test_each_message_is_one_datagram_of_lines(manager: Manager, notifier: Notifier) -> None:
    """Readiness with a status, a status, the stop with the time that it needs, more time (sd_notify(3))."""
    notifier.ready("serving demo")
    notifier.status("hold")
    notifier.stopping("lowering", 40.0)
    notifier.extend(1.5)
    assert manager.taken() == ["READY=1\nSTATUS=serving demo", "STATUS=hold",
                               "STOPPING=1\nSTATUS=lowering\nEXTEND_TIMEOUT_USEC=40000000",
                               "EXTEND_TIMEOUT_USEC=1500000"]


def test_a_status_cannot_begin_another_key(manager: Manager, notifier: Notifier) -> None:
    """Line ends in a text become blanks, and it is cut at a bound."""
    notifier.status("a\nWATCHDOG=1\n\tb")
    assert manager.taken() == ["STATUS=a WATCHDOG=1 b"]
    assert len(one_line("x" * 5000)) == STATUS_MAX


def test_a_manager_that_does_not_read_holds_nobody(manager: Manager, notifier: Notifier) -> None:
    """A full socket is counted, and sending goes on when there is room again."""
    sent = 0
    while notifier.send(f"STATUS={'x' * 1000}"):
        sent += 1
        assert sent < 100_000
    assert notifier.dropped == 1
    assert len(manager.taken()) == sent
    assert notifier.send("STATUS=again")


def test_readiness_that_was_not_taken_goes_with_the_next_message(manager: Manager, notifier: Notifier) -> None:
    """What is said once must arrive once; a status that was dropped is history."""
    while notifier.send("STATUS=full"):
        pass
    notifier.ready("serving")
    notifier.stopping("ending", 1.0)
    manager.taken()
    notifier.send("WATCHDOG=1")
    notifier.send("WATCHDOG=1")
    assert manager.taken() == ["READY=1\nSTOPPING=1\nWATCHDOG=1", "WATCHDOG=1"]


def test_without_a_manager_nothing_is_sent_and_nothing_raised(tmp_path: Path) -> None:
    """No address: nothing; an address where nobody listens: counted."""
    silent = Notifier()
    assert not silent.send("READY=1")
    assert silent.dropped == 0
    gone = Notifier(str(tmp_path / "gone"))
    assert not gone.send("READY=1")
    assert gone.dropped == 1
    gone.close()
    gone.close()


def test_the_environment_is_taken_out(tmp_path: Path) -> None:
    """Children are not to speak for the daemon, so the names are removed."""
    environ = {"NOTIFY_SOCKET": str(tmp_path / "n"), "WATCHDOG_USEC": "2500000", "WATCHDOG_PID": str(os.getpid()),
               "HOME": "/"}
    made = Notifier.taken_from(environ)
    assert made.watchdog_s == 2.5
    assert environ == {"HOME": "/"}
    made.close()


@pytest.mark.parametrize(("usec", "pid"), [("0", ""), ("-5", ""), ("x", ""), ("", ""), ("1000", "1"), ("٣", "")])
def test_a_watchdog_that_is_not_ours_or_no_number_is_none(tmp_path: Path, usec: str, pid: str) -> None:
    """Only a positive number that is meant for this process asks for keep-alives."""
    made = Notifier.taken_from({"NOTIFY_SOCKET": str(tmp_path / "n"), "WATCHDOG_USEC": usec, "WATCHDOG_PID": pid}, 4711)
    assert made.watchdog_s is None
    made.close()


def test_an_address_of_another_form_is_none() -> None:
    """sd_notify(3) knows paths and abstract names; anything else is not spoken to."""
    made = Notifier.taken_from({"NOTIFY_SOCKET": "vsock:2:1234", "WATCHDOG_USEC": "1000000"})
    assert made.watchdog_s is None
    assert not made.send("READY=1")


def test_abstract_names_are_reached() -> None:
    """'@name' is a socket without a file."""
    address = f"@hvhost-test-{os.getpid()}"
    manager, made = Manager(address), Notifier(address)
    made.ready("here")
    assert manager.taken() == ["READY=1\nSTATUS=here"]
    made.close()
    manager.socket.close()


def test_judged_blocks_feed_no_more_often_than_needed(manager: Manager, notifier: Notifier) -> None:
    """A block every 32 ms for 8 s of a watchdog time of 4 s: a keep-alive a quarter of it, none missing."""
    watchdog = Watchdog(notifier)
    times = []
    for k in range(250):
        before = watchdog.fed
        watchdog.judged(k * 0.032)
        if watchdog.fed > before:
            times.append(k * 0.032)
    assert manager.taken() == ["WATCHDOG=1"] * len(times)
    assert max(b - a for a, b in pairwise(times)) <= 4.0 / FEEDS + 0.032 + 1e-9
    assert len(times) <= 8 * FEEDS / 4 + 1


def test_a_turning_loop_feeds_only_while_the_bench_is_idle(manager: Manager, notifier: Notifier) -> None:
    """With anything permitted the loop may turn for ever: without a judged block nothing is fed."""
    watchdog = Watchdog(notifier)
    for k in range(100):
        watchdog.turned(float(k), idle=False)
    assert manager.taken() == []
    watchdog.turned(100.0, idle=True)
    assert manager.taken() == ["WATCHDOG=1"]


def test_a_keep_alive_that_was_not_taken_is_tried_again_at_once(manager: Manager, notifier: Notifier) -> None:
    """What the socket refused does not count as fed."""
    watchdog = Watchdog(notifier)
    while notifier.send("STATUS=full"):
        pass
    watchdog.judged(0.0)
    assert watchdog.fed == 0
    manager.taken()
    watchdog.judged(0.1)
    assert manager.taken() == ["WATCHDOG=1"]


def test_nobody_asked_for_a_watchdog(tmp_path: Path) -> None:
    """Without a watchdog time nothing is ever fed."""
    made = Notifier(str(tmp_path / "notify"))
    watchdog = Watchdog(made)
    watchdog.judged(0.0)
    watchdog.turned(9.0, idle=True)
    assert (watchdog.fed, made.dropped) == (0, 0)
    made.close()
