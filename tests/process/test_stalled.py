"""SIGSTOP of the daemon for 5 s, then SIGCONT: lowered meanwhile, and nothing stale leaves on waking (S4, S10)."""

import signal
import time

import pytest

from tests.process.figures import figure
from tests.process.judge import (
    ENERGISED,
    HOST_SILENT,
    OFF,
    WARNING,
    assert_lowered,
    assert_never_released,
    assert_stays_off,
)
from tests.process.scene import DOWN_SLEW, LEASE_S, LOWER_MAX_S, RAMP_THEN_HOLD, SLOW_RAMP, Scene, plan_text, wait

STALL_S = 5.0


def stall(scene: Scene) -> int:
    """Stop the daemon for the stall's length of the bench's own time; returns a tick after the stop."""
    begun_s = time.monotonic()
    scene.daemon.signal(signal.SIGSTOP)
    gone = scene.tick_now()
    wait(lambda: scene.tick_now() >= gone + STALL_S * scene.truth.tick_hz, "the stall's end")
    scene.daemon.signal(signal.SIGCONT)
    assert time.monotonic() - begun_s >= STALL_S
    return gone


@pytest.mark.parametrize(("phase", "steps"), [("ramp", SLOW_RAMP), ("hold", RAMP_THEN_HOLD)], ids=["ramp", "hold"])
def test_stalled_while_energised(phase: str, steps: str) -> None:
    """The MCU lowers within the lease; awake again the daemon ends the run, and the words never rise again."""
    with Scene() as scene:
        scene.start_standin()
        scene.start_daemon()
        scene.ready()
        scene.energise(plan_text(steps))
        scene.wait_volts(4200.0)
        scene.wait_phase(phase)
        assert scene.truth.last["mcu"] == ENERGISED
        gone = stall(scene)
        status = scene.wait_closed()
        lower_s, zero_s = assert_lowered(scene.truth, gone, lease_s=LEASE_S, slew_words_per_s=DOWN_SLEW,
                                         lower_max_s=LOWER_MAX_S)
        figure(f"SIGSTOP in {phase}: to lowering", lower_s, "s")
        figure(f"SIGSTOP in {phase}: to zero and cut", zero_s, "s")
        silent = scene.truth.first(lambda line: line["causes"] & HOST_SILENT, gone)
        assert silent is not None
        assert status["outcome"] in ("interrupted", "tripped"), status
        assert scene.result()["verdict"] != "pass"
        assert "host silent" in scene.status()["snapshot"]["latched"]


def test_stalled_in_warning() -> None:
    """A daemon stalled in the warning loses the arm; on waking nothing energises."""
    with Scene() as scene:
        scene.start_standin()
        scene.start_daemon()
        scene.ready()
        scene.open_run(plan_text(RAMP_THEN_HOLD))
        scene.arm()
        scene.control("press 0.4")
        wait(lambda: scene.truth.last.get("mcu") == WARNING, "the warning")
        gone = stall(scene)
        assert scene.wait_outcome()["outcome"] != "finished"
        off = scene.truth.first(lambda line: line["mcu"] == OFF, gone)
        assert off is not None
        assert off["tick"] <= gone + LEASE_S * scene.truth.tick_hz + 20
        later = scene.tick_now() + 10_000
        wait(lambda: scene.tick_now() > later, "a second of silence")
        # in proving the inhibit is released and reasserted with the relay open and words at zero
        assert_never_released([line for line in scene.truth.states if line["relay"]])
        assert_stays_off([line for line in scene.truth.states if line["tick"] > off["tick"]])
