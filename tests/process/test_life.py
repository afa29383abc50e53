"""A daemon under a service manager: ready, alive, stalled, stopped in mid-run, and with a log that nobody reads."""

import os
import signal
import socket
import subprocess
import sys
import time
from typing import Any

from tests.process.figures import figure
from tests.process.judge import ENERGISED, HOST_SILENT, assert_lowered, stopped
from tests.process.scene import DOWN_SLEW, LEASE_S, LOWER_MAX_S, RAMP_THEN_HOLD, Scene, plan_text, wait

WATCHDOG_S = 2.0


class Manager:
    """Plays the service manager: gives an address and a watchdog time, keeps what is sent with its time."""

    def __init__(self, scene: Scene) -> None:
        self.socket = socket.socket(socket.AF_UNIX, socket.SOCK_DGRAM | socket.SOCK_NONBLOCK)
        address = str(scene.folder / "notify")
        self.socket.bind(address)
        self.environ = {"NOTIFY_SOCKET": address, "WATCHDOG_USEC": str(round(WATCHDOG_S * 1e6))}
        self._heard: list[tuple[float, str]] = []

    @property
    def heard(self) -> list[tuple[float, str]]:
        """Every message so far, with the time at which it was taken."""
        try:
            while True:
                self._heard.append((time.monotonic(), self.socket.recv(4096).decode()))
        except BlockingIOError:
            return list(self._heard)

    def fed(self, since_s: float) -> int:
        """Keep-alives taken since then."""
        return sum(text == "WATCHDOG=1" for at_s, text in self.heard if at_s >= since_s)

    def said(self, part: str) -> bool:
        """Whether a message holds this."""
        return any(part in text for _, text in self.heard)


def test_a_loop_that_stalls_starves_the_watchdog_and_is_replaced_by_a_passive_daemon() -> None:
    """Fed in a hold; stopped, it is fed no more and the MCU lowers; the manager's kill leaves a record to recover."""
    with Scene() as scene:
        scene.start_standin()
        manager = Manager(scene)
        daemon = scene.start_daemon(env=manager.environ)
        wait(lambda: manager.said("READY=1"), "readiness")
        scene.ready()
        scene.energise(plan_text(RAMP_THEN_HOLD))
        scene.wait_phase("hold")
        begun_s = time.monotonic()
        wait(lambda: manager.fed(begun_s) >= 3, "keep-alives in the hold", 4 * WATCHDOG_S)
        gone = scene.tick_now()
        daemon.signal(signal.SIGSTOP)  # the loop stands still, whatever its timers would do
        at_s = time.monotonic() + 0.2
        wait(lambda: time.monotonic() > at_s, "what was under way")
        left = manager.fed(at_s)
        wait(lambda: time.monotonic() > at_s + WATCHDOG_S, "the watchdog's time")
        assert manager.fed(at_s) == left
        daemon.signal(signal.SIGABRT)  # what the manager does then
        daemon.signal(signal.SIGCONT)
        assert daemon.wait_end() == -signal.SIGABRT
        assert "Fatal Python error: Aborted" in daemon.err  # and where each thread stood
        lower_s, _ = assert_lowered(scene.truth, gone, lease_s=LEASE_S, slew_words_per_s=DOWN_SLEW,
                                    lower_max_s=LOWER_MAX_S)
        figure("loop stalled under a watchdog: to lowering", lower_s, "s")
        assert scene.truth.first(lambda line: line["causes"] & HOST_SILENT, gone) is not None
        scene.start_daemon()
        assert scene.result()["outcome"] == "interrupted"
        assert scene.truth.last["mcu"] != ENERGISED
        manager.socket.close()


def test_a_stop_in_mid_run_lowers_first_and_says_how_long_it_may_take() -> None:
    """SIGTERM in a hold: told to the manager at once, lowered at the down-slew, the record closed, code 0."""
    with Scene() as scene:
        scene.start_standin()
        manager = Manager(scene)
        daemon = scene.start_daemon(env=manager.environ)
        scene.ready()
        scene.energise(plan_text(RAMP_THEN_HOLD))
        scene.wait_phase("hold")
        asked = scene.tick_now()
        assert manager.heard  # it reads, as a manager does
        daemon.signal(signal.SIGTERM)
        wait(lambda: manager.heard and daemon.process.poll() is not None, "the daemon's end")
        assert daemon.process.returncode == 0
        stopping = next(text for _, text in manager.heard if text.startswith("STOPPING=1"))
        assert int(stopping.rpartition("EXTEND_TIMEOUT_USEC=")[2]) > LOWER_MAX_S * 1e6
        words = [line for line in scene.truth.states if line["tick"] >= asked]
        zero = next(line for line in words if stopped(line))
        took_s = (zero["tick"] - asked) / scene.truth.tick_hz
        assert took_s > 0.5 * max(line["v_word"] for line in words) / DOWN_SLEW  # a ramp, not a cut
        assert scene.result()["outcome"] == "lowered"
        assert not os.path.exists(scene.socket)
        manager.socket.close()


def test_a_standard_error_that_nobody_reads_holds_nobody() -> None:
    """The pipe is full before the first line: the run goes its way, the loop stays on time, a cut is obeyed at once."""
    with Scene() as scene:
        scene.start_standin()
        reader, writer = os.pipe()
        os.set_blocking(writer, False)
        try:
            while True:
                os.write(writer, b"x" * 4096)
        except BlockingIOError:
            os.set_blocking(writer, True)
        process = _daemon(scene, writer)
        try:
            wait(lambda: os.path.exists(scene.socket), "the daemon's socket")
            scene.ready()
            scene.energise(plan_text(RAMP_THEN_HOLD))
            scene.wait_phase("hold")
            loop = scene.snapshot()["loop"]
            figure("longest stall with a full standard error", loop["longest_s"], "s")
            scene.call("cut")
            wait(lambda: stopped(scene.truth.last), "the cut")
            scene.wait_closed()
            process.send_signal(signal.SIGTERM)
            assert process.wait(30.0) == 0
        finally:
            process.kill()
            process.wait()
            os.close(reader)
            os.close(writer)


def _daemon(scene: Scene, stderr: int) -> "subprocess.Popen[Any]":
    return subprocess.Popen(
        [sys.executable, "-m", "hvhost", "serve", str(scene.bench_path), "--port", scene.device, "--socket",
         scene.socket, "--runs", str(scene.runs), "--standin"],
        stdin=subprocess.DEVNULL, stdout=subprocess.DEVNULL, stderr=stderr, start_new_session=True)
