"""The plain bench against a served socket: control by an explicit act, stops beside everything, nothing that arms."""

import os
import threading
from collections.abc import Iterator
from dataclasses import replace
from itertools import pairwise
from pathlib import Path

import pytest

import hvhost.client as package
from hvhost.client import AsyncBench, Bench, CannotConnect, CommandRefused, connect
from hvhost.publish.conversation import Later
from hvhost.publish.readings import ReadingsFeed
from hvhost.publish.snapshot import Permission, StopState
from hvhost.publish.tickets import read_ticket, write_ticket
from tests.client.test_asking import ANSWER
from tests.pictures.states import RUNNING
from tests.publish.serving import FakeBench, served
from tests.publish.test_readings import FIGURES, block

CONFIRMED = StopState.CUT_CONFIRMED


@pytest.fixture
def fake(tmp_path: Path) -> Iterator[FakeBench]:
    """A served bench that answers."""
    with served(tmp_path) as bench:
        bench.answers |= {"set": {}, "seat.take": {"ticket": "t1"}, "seat.check": {}, "seat.release": {},
                          "seat.acknowledge": {}, "run": ANSWER, "direct": ANSWER, "cancel": {"cancelled": "270115n1"},
                          "status": {"runs_folder": str(tmp_path)}}
        assert bench.server is not None
        bench.server.readings = ReadingsFeed(lambda: FIGURES)
        yield bench


def methods(fake: FakeBench) -> list[str]:
    """What was asked, in order."""
    return [method for method, _ in fake.asked]


def test_the_first_set_point_takes_control_and_the_end_frees_it(fake: FakeBench) -> None:
    """Control is taken once, shared with this user's terminal, and its ticket is gone in the end."""
    with connect(fake.path, who="script") as bench:
        bench.set(volts=5e3, amps=1e-3, slew=500)
        bench.set(volts=4e3, amps=1e-3)
        assert read_ticket(fake.path) == "t1"
    assert read_ticket(fake.path) == ""
    assert methods(fake) == ["seat.take", "set", "set"]
    assert fake.asked[1][1] == {"as": "script", "ticket": "t1", "volts": 5e3, "amps": 1e-3, "slew": 500.0}


def test_control_that_this_user_s_terminal_holds_is_shared_and_left(fake: FakeBench) -> None:
    """``hvhost arm`` keeps its ticket; the script neither takes it over nor frees it."""
    write_ticket(fake.path, "of the terminal")
    with connect(fake.path) as bench:
        bench.set(volts=1e3, amps=1e-3)
        bench.release_control()
    assert methods(fake) == ["seat.check", "set"]
    assert fake.asked[1][1]["ticket"] == "of the terminal"
    assert read_ticket(fake.path) == "of the terminal"


def test_a_ticket_that_is_over_is_not_used(fake: FakeBench) -> None:
    """Control is taken anew, with the reason given."""
    write_ticket(fake.path, "old")
    fake.answers["seat.check"] = CommandRefused("control of the bench", "nobody has it")
    with connect(fake.path) as bench:
        bench.take_control("night shift")
        assert methods(fake) == ["seat.check", "seat.take"]
        assert fake.asked[1][1]["reason"] == "night shift"
        bench.acknowledge()
        bench.release_control()
    assert methods(fake)[2:] == ["seat.acknowledge", "seat.release"]


def test_a_run_is_prepared_and_nothing_here_arms(fake: FakeBench, tmp_path: Path) -> None:
    """Texts go to the daemon; no method of the client asks for an arm or a reset."""
    (tmp_path / "p.yaml").write_text("plan: x\n")
    with connect(fake.path) as bench:
        prepared = bench.run(tmp_path / "p.yaml", specimen="S-1", values={"v": "1 kV"})
        assert (prepared.run, prepared.volts_highest) == ("270115n1", 12e3)
        assert bench.direct("S-2").run == "270115n1"
        assert bench.cancel() == "270115n1"
    assert "arm" not in methods(fake)
    assert "reset" not in methods(fake)
    for kind in (Bench, AsyncBench):
        assert not [name for name in dir(kind) if "arm" in name.lower() or name in ("call", "reset", "press")]
    sources = [p.read_text() for p in Path(package.__file__).parent.glob("*.py")]
    assert not [s for s in sources if '"arm"' in s or '"reset"' in s or '"commission"' in s]


def test_a_stop_goes_past_a_call_that_waits(fake: FakeBench) -> None:
    """While one thread waits for an answer another lowers, over a connection of its own."""
    later = fake.answers["set"] = Later()
    asked = threading.Event()
    fake.on_call = lambda method: asked.set() if method == "set" else None
    with connect(fake.path) as bench:
        thread = threading.Thread(target=lambda: bench.set(volts=1.0, amps=1e-3))
        thread.start()
        assert asked.wait(10.0)
        bench.lower()
        assert thread.is_alive()
        assert fake.loop is not None
        fake.loop.call_soon_threadsafe(later.finish, {})
        thread.join(10.0)
        assert not thread.is_alive()
    assert methods(fake) == ["seat.take", "set", "lower"]


def test_a_cut_returns_when_it_is_confirmed_and_says_so_when_it_is_not(fake: FakeBench,
                                                                      monkeypatch: pytest.MonkeyPatch) -> None:
    """Only a picture made after the cut counts; without one the sentence names the emergency switching off."""
    fake.publish(replace(RUNNING, seq=10, stop=CONFIRMED))

    def confirm(method: str) -> None:
        if method == "cut" and fake.loop is not None and fake.server is not None:
            later = replace(RUNNING, seq=11, stop=answer[0])
            fake.loop.call_later(0.05, fake.server.offer_nowait, later)

    fake.on_call = confirm
    with connect(fake.path) as bench:
        answer = [CONFIRMED]
        bench.cut()
        fake.publish(replace(RUNNING, seq=10, stop=CONFIRMED))
        answer = [StopState.CUT_NOT_CONFIRMED]
        with pytest.raises(CannotConnect, match="emergency switching off"):
            bench.cut()
        monkeypatch.setattr("hvhost.client.bench.CONFIRM_S", 0.2)
        answer = [StopState.CUT_SENT]
        with pytest.raises(CannotConnect, match="no confirmation"):
            bench.cut()


def test_readings_are_blocks_until_so_many_seconds(fake: FakeBench) -> None:
    """Over a connection of their own: the loop may ask for anything else meanwhile; leaving it ends them."""
    stop = threading.Event()

    def publish() -> None:
        n = 0
        while not stop.wait(0.02):
            assert fake.server is not None
            assert fake.server.readings is not None
            fake.server.readings.take(block(32 * n, [n] * 32))
            fake.publish(replace(RUNNING, seq=n))
            n += 1

    thread = threading.Thread(target=publish)
    with connect(fake.path) as bench:
        thread.start()
        try:
            blocks = []
            for one in bench.readings(seconds=0.2):
                blocks.append(one)
                assert bench.status().bench == RUNNING.bench
            assert sum(map(len, blocks)) >= 200
            assert all(b.index == a.last_index + 1 for a, b in pairwise(blocks))
            endless = bench.readings(every=8)
            assert len(next(endless)) >= 1
            endless.close()  # type: ignore[attr-defined]
        finally:
            stop.set()
            thread.join(10.0)


def test_readings_that_stay_away_are_told(fake: FakeBench, monkeypatch: pytest.MonkeyPatch) -> None:
    """A loop over nothing does not wait for ever."""
    monkeypatch.setattr("hvhost.client.readings.STILL_S", 0.05)
    with connect(fake.path) as bench, pytest.raises(CannotConnect, match="none for"):
        next(bench.readings())


def test_waiting_is_for_a_condition_and_bounded(fake: FakeBench) -> None:
    """The picture that fits comes back; what never fits is a sentence."""
    fake.publish(replace(RUNNING, permission=Permission.RUNNING))
    with connect(fake.path) as bench:
        assert bench.wait_energised(1.0).permission is Permission.RUNNING
        with pytest.raises(CannotConnect, match="after 0 s"):
            bench.wait_until(lambda s: False, 0.0)
        assert bench.runs() == ()


def test_nobody_there_is_a_sentence(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """By path, by name, and without either."""
    monkeypatch.setenv("XDG_RUNTIME_DIR", str(tmp_path))
    monkeypatch.delenv("HVHOST_SOCKET", raising=False)
    for name in ("", "demo", str(tmp_path / "x.sock")):
        with pytest.raises(CannotConnect, match="hvhost serve BENCH"):
            connect(name)
    assert os.listdir(tmp_path) == []
