"""A stop by command, key and socket: at once, without the seat, under load and beside a client that is stalled (S7)."""

import contextlib
import json
import socket
import threading
import time
from collections.abc import Iterator

import pytest

from hvhost.publish.client import Client
from tests.process.figures import figure
from tests.process.judge import ENERGISED, LOWERING, OFF, assert_words_never_rise, stopped
from tests.process.scene import RAMP_THEN_HOLD, Scene, plan_text, wait
from tests.process.terminal import Terminal

WATCHERS = 6
AT_ONCE_S = 5.0  # generous: what is measured is printed, a stuck stop would never come


@contextlib.contextmanager
def load(scene: Scene) -> Iterator[None]:
    """Watchers at the highest rate, one client that asks without end, one that never reads, one that sends rubbish."""
    done = threading.Event()

    def watch() -> None:
        with Client.connect(scene.socket) as client:
            client.call("subscribe", {"rate_hz": 20.0})
            while not done.is_set():
                client.notification(0.1)

    def ask() -> None:
        with Client.connect(scene.socket) as client:
            while not done.is_set():
                client.call("status")
                done.wait(0.025)

    stalled, rubbish = socket.socket(socket.AF_UNIX), socket.socket(socket.AF_UNIX)
    for one in (stalled, rubbish):
        one.connect(scene.socket)
    stalled.sendall(b'{"jsonrpc":"2.0","id":1,"method":"subscribe","params":{"rate_hz":20}}\n')
    rubbish.sendall(b'{"jsonrpc":"2.0","id":1,"method":"ar' + b"\x00" * 5000)
    threads = [threading.Thread(target=watch, daemon=True) for _ in range(WATCHERS)]
    threads.append(threading.Thread(target=ask, daemon=True))
    for thread in threads:
        thread.start()
    try:
        wait(lambda: (scene.snapshot()["outlets"] or [{}])[0].get("clients", 0) >= WATCHERS + 3, "the load")
        yield
    finally:
        done.set()
        for thread in threads:
            thread.join(10.0)
        stalled.close()
        rubbish.close()


def held_bench(scene: Scene) -> None:
    """A bench in a hold, with someone else in control."""
    scene.start_standin()
    scene.start_daemon()
    scene.ready()
    scene.energise(plan_text(RAMP_THEN_HOLD))
    scene.wait_volts(5000.0)
    assert scene.truth.last["mcu"] == ENERGISED


def judge_stop(scene: Scene, verb: str, name: str, before: int, asked_s: float) -> None:
    """The stop took effect, and the run ended by it."""
    wanted = (LOWERING,) if verb == "lower" else (OFF,)
    found = wait(lambda: scene.truth.first(lambda line: line["mcu"] in wanted, before), f"{verb} by {name}", AT_ONCE_S)
    figure(f"{verb} by {name}: to the MCU's act, our polling included", time.monotonic() - asked_s, "s")
    wait(lambda: stopped(scene.truth.last), "the cut", 20.0)
    assert_words_never_rise([line for line in scene.truth.states if line["tick"] >= found["tick"]])
    assert not scene.truth.last["causes"], "an operator's stop latches nothing"
    status = scene.wait_outcome()
    assert status["outcome"] == ("lowered" if verb == "lower" else "cut"), status


@pytest.mark.parametrize("verb", ["lower", "cut"])
def test_stop_by_command(verb: str) -> None:
    """``hvhost lower`` and ``hvhost cut`` stop, whoever has control; a cut is told as confirmed."""
    with Scene() as scene:
        held_bench(scene)
        with load(scene):
            before, asked_s = scene.tick_now(), time.monotonic()
            done = scene.command(verb, "--socket", scene.socket, "--json")
            assert done.process.returncode == 0, done.out + done.err
            if verb == "cut":
                assert json.loads(done.out)["stop"] == "cut confirmed"
            judge_stop(scene, verb, "command", before, asked_s)


@pytest.mark.parametrize("verb", ["cut"])
def test_stop_by_socket(verb: str) -> None:
    """A request behind requests that wait, from a client that reads nothing, stops all the same."""
    with Scene() as scene:
        held_bench(scene)
        with load(scene), socket.socket(socket.AF_UNIX) as other:
            other.connect(scene.socket)
            queue = b"".join(b'{"jsonrpc":"2.0","id":%d,"method":"status","params":{}}\n' % n for n in range(60))
            before, asked_s = scene.tick_now(), time.monotonic()
            other.sendall(queue + b'{"jsonrpc":"2.0","id":99,"method":"%b","params":{}}\n' % verb.encode())
            judge_stop(scene, verb, "socket", before, asked_s)


@pytest.mark.parametrize(("key", "verb"), [("l", "lower"), (" ", "cut")], ids=["l", "space"])
def test_stop_by_key(key: str, verb: str) -> None:
    """One key of the screen stops; the space bar does so on a terminal that no longer takes the screen's output."""
    with Scene() as scene:
        held_bench(scene)
        with load(scene), Terminal("watch", "--socket", scene.socket) as screen:
            wait(lambda: "HOLD" in screen.text, "the screen")
            if key == " ":
                screen.reading = False
            before, asked_s = scene.tick_now(), time.monotonic()
            screen.type(key)
            judge_stop(scene, verb, f"key {key!r}", before, asked_s)
            screen.reading = True
            screen.type("q")
            assert screen.process.wait(20.0) == 0
