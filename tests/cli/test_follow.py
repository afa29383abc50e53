"""Following a run: new lines once, Ctrl-C lowers, a second one cuts, and the exit code says how it ended."""

import argparse
import json
import os
import signal
import threading
from pathlib import Path
from typing import Any

import pytest

from hvhost.cli import exits, follow
from hvhost.cli.follow import Follower, finish
from hvhost.cli.talk import Bench
from hvhost.words.errors import CannotConnect
from tests.publish.serving import FakeBench, served


def status(**changes: Any) -> dict[str, Any]:
    """A daemon's status as a run is live."""
    return {"run": "n1", "stage": "live", "outcome": "", "why": "", "recording": True, "closing": 0, "verdict": "",
            "folder": "/runs/n1", "arm_input": True,
            "snapshot": {"utc_ns": 0, "events": [{"number": 3, "utc_ns": 0, "severity": "note", "text": "step 1"}]},
            **changes}


CLOSED = {"stage": "closed", "recording": False}


def bench_of(fake: FakeBench) -> Bench:
    """A connection as the commands make it."""
    return Bench(argparse.Namespace(socket=fake.path, who="test"))


def interrupted(fake: FakeBench, times: int) -> None:
    """Send Ctrl-C to ourselves at the first statuses; the run closes after the last stop."""
    sent = 0

    def on_call(method: str) -> None:
        nonlocal sent
        if method == "status" and sent < times and len(stops(fake)) == sent:
            sent += 1
            os.kill(os.getpid(), signal.SIGINT)
        if len(stops(fake)) == times:
            fake.answers["status"] = status(**CLOSED, outcome="lowered")

    fake.on_call = on_call


def stops(fake: FakeBench) -> list[str]:
    """The stops that were asked for."""
    return [method for method, _ in fake.asked if method in ("lower", "cut")]


@pytest.mark.parametrize(("times", "wanted"), [(1, ["lower"]), (2, ["lower", "cut"])])
def test_interrupts_stop(tmp_path: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch,
                         times: int, wanted: list[str]) -> None:
    """The first Ctrl-C lowers, the second cuts; neither waits for the next look, which here would take ten minutes."""
    monkeypatch.setattr(follow, "POLL_S", 600.0)
    with served(tmp_path) as fake:
        fake.answers["status"] = status()
        interrupted(fake, times)
        with bench_of(fake) as bench:
            ended = {}

            def wake() -> None:  # the last look, once the stops are in
                while not finished.wait(0.02):
                    if len(stops(fake)) == times:
                        os.kill(os.getpid(), signal.SIGINT)

            finished = threading.Event()
            waker = threading.Thread(target=wake)
            waker.start()
            try:
                ended = Follower(bench, "n1").follow()
            finally:
                finished.set()
                waker.join()
    assert stops(fake)[:times] == wanted
    assert ended["outcome"] == "lowered"
    assert "lowering; Ctrl-C once more cuts" in capsys.readouterr().err


def test_the_begin_is_called_with_interrupts_caught(tmp_path: Path) -> None:
    """A Ctrl-C while the arm is asked for stops the run instead of leaving it armed."""
    with served(tmp_path) as fake:
        fake.answers["status"] = status()
        fake.answers["arm"] = {}
        fake.on_call = lambda method: fake.answers.update(
            {"status": status(**CLOSED)}) if method == "lower" else None

        def begin() -> None:
            os.kill(os.getpid(), signal.SIGINT)
            bench.call("arm")

        with bench_of(fake) as bench:
            Follower(bench, "n1").follow(begin)
    assert stops(fake) == ["lower"]
    assert signal.getsignal(signal.SIGINT) is signal.default_int_handler


def test_each_line_is_told_once(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Events are printed as they come, and not again; quiet prints none."""
    with served(tmp_path) as fake, bench_of(fake) as bench:
        follower = Follower(bench, "n1")
        follower.skip_old({"events": [{"number": 1}]})
        shot = status()["snapshot"]
        follower.show(shot)
        follower.show(shot)
        Follower(bench, "n1", quiet=True).show(shot)
    assert capsys.readouterr().out.count("step 1") == 1


def test_another_run_ends_the_following(tmp_path: Path) -> None:
    """A daemon that was started anew does not know the run."""
    with served(tmp_path) as fake, bench_of(fake) as bench:
        fake.answers["status"] = status(run="")
        with pytest.raises(CannotConnect, match="hvhost runs"):
            Follower(bench, "n1").follow()


@pytest.mark.parametrize(("changes", "code"), [
    ({"outcome": "finished", "verdict": "pass"}, exits.PASSED),
    ({"outcome": "finished", "verdict": "fail"}, exits.FAILED),
    ({"outcome": "finished", "verdict": "not decided: the record could not be closed"}, exits.NOT_DECIDED),
    ({"outcome": "finished", "verdict": ""}, exits.NOT_DECIDED),
    ({"outcome": "tripped", "verdict": "fail"}, exits.TRIPPED),
    ({"outcome": "interrupted", "verdict": "pass"}, exits.INTERRUPTED),
    ({"outcome": "record failed", "verdict": "pass"}, exits.INTERRUPTED),
    ({"outcome": "cancelled", "verdict": ""}, exits.INTERRUPTED),
    ({"outcome": "failed", "verdict": "pass"}, exits.FAILED),
    ({"outcome": "", "stage": "prepared", "why": "arm refused: event"}, exits.REFUSED),
])
def test_exit_codes(capsys: pytest.CaptureFixture[str], changes: dict[str, Any], code: int) -> None:
    """Only a finished run has its verdict's code; a pass is never the code of a run that ended otherwise."""
    assert finish(status(**{**CLOSED, **changes}), as_json=False) == code
    assert "record: /runs/n1" in capsys.readouterr().out
    assert finish(status(**{**CLOSED, **changes}), as_json=True) == code
    assert json.loads(capsys.readouterr().out)["exit"] == code
