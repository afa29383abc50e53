"""Real-time scheduling where the system permits it, a reason with a remedy where not."""

import os
import threading

import pytest

from hvhost.ports import scheduling


def test_the_calling_thread_is_raised_or_told_why_not() -> None:
    """Either the thread runs under SCHED_FIFO and gives it back, or a sentence says how to permit it."""
    outcome: list[str] = []

    def work() -> None:
        told = scheduling.take_realtime()
        if told:
            outcome.append(told)
            return
        assert os.sched_getscheduler(0) & ~os.SCHED_RESET_ON_FORK == os.SCHED_FIFO
        scheduling.give_back()
        outcome.append("raised" if os.sched_getscheduler(0) == os.SCHED_OTHER else "kept")

    thread = threading.Thread(target=work)
    thread.start()
    thread.join()
    assert outcome[0] == "raised" or "LimitRTPRIO" in outcome[0]


def test_a_refusal_is_a_sentence(monkeypatch: pytest.MonkeyPatch) -> None:
    """Without permission nothing is raised and the remedy is named."""
    def refuse(*_: object) -> None:
        raise PermissionError(1, "Operation not permitted")

    monkeypatch.setattr(os, "sched_setscheduler", refuse)
    assert "Operation not permitted" in scheduling.take_realtime()
    assert "ulimit -r" in scheduling.take_realtime()


def test_no_thread_is_no_fault() -> None:
    """A recorder that has no thread needs no raising."""
    assert scheduling.raise_thread(None) == ""
    assert scheduling.raise_thread(threading.Thread()) == ""
