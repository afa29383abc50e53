"""The MCU resets, browns out or dies in mid-run: the run is interrupted and nothing resumes it (S4)."""

import pytest

from tests.process.judge import ENERGISED, OFF, RESTARTED_ENERGISED, assert_stays_off, stopped
from tests.process.scene import RAMP_THEN_HOLD, SLOW_RAMP, Scene, plan_text, wait


@pytest.mark.parametrize("fault", ["mcu-reset", "fault on mcu-brownout"])
def test_reset_in_mid_run(fault: str) -> None:
    """After a reset the board is off and latched, the run is interrupted, and its evidence names the reset."""
    with Scene() as scene:
        scene.start_standin()
        scene.start_daemon()
        scene.ready()
        scene.energise(plan_text(SLOW_RAMP))
        scene.wait_volts(4200.0)
        before = scene.tick_now()
        assert scene.truth.last["mcu"] == ENERGISED
        scene.control(fault)
        status = scene.wait_closed()
        assert status["outcome"] in ("interrupted", "tripped"), status
        assert scene.result()["verdict"] != "pass"
        reset = scene.truth.events("mcu reset")[0]
        off = scene.truth.first(stopped, before - 1) or scene.truth.last
        assert stopped(off)
        if fault != "mcu-reset":
            scene.control("fault off mcu-brownout")
        wait(lambda: (s := scene.snapshot())["link"] == "greeted" and s["reading"], "the new session")
        assert scene.snapshot()["permission"] == "idle"
        assert "restarted while energised, causes may be missing" in scene.snapshot()["latched"]
        assert scene.truth.last["causes"] & RESTARTED_ENERGISED
        after = [line for line in scene.truth.lines if line["kind"] == "state"]
        at = next(number for number, line in enumerate(after) if line["t_s"] >= reset["t_s"])
        # 10 ms after the release the cut is done (boot), whatever the wiring did before
        assert_stays_off([line for line in after[at:] if line["t_s"] > reset["t_s"] + 0.010])


def test_standin_killed() -> None:
    """The daemon says that the port is gone and closes the run as interrupted; a verdict is never a pass."""
    with Scene() as scene:
        scene.start_standin()
        scene.start_daemon()
        scene.ready()
        scene.energise(plan_text(RAMP_THEN_HOLD))
        scene.wait_volts(5000.0)
        scene.kill_standin()
        status = scene.wait_closed()
        assert status["outcome"] == "interrupted", status
        assert scene.result()["verdict"] != "pass"
        shot = scene.snapshot()
        assert shot["link"] == "lost"
        assert shot["voltage"] == "unknown"
        assert not shot["reading"] or shot["reading"]["volts"] is None
        assert "lost" in scene.daemon.err
        assert scene.daemon.process.poll() is None
        shown = scene.command("status", "--socket", scene.socket)
        assert "output unknown - use the emergency switching off" in shown.out
        refused = scene.command("cut", "--socket", scene.socket)
        assert refused.process.returncode
        assert "use the emergency switching off" in refused.out + refused.err


def test_board_silent() -> None:
    """An MCU that stops answering is told as silent; the run ends as interrupted and nothing resumes it."""
    with Scene() as scene:
        scene.start_standin()
        scene.start_daemon()
        scene.ready()
        scene.energise(plan_text(RAMP_THEN_HOLD))
        scene.wait_volts(5000.0)
        scene.control("fault on mute")
        wait(lambda: scene.truth.last["mcu"] == OFF, "the bench off")
        scene.control("fault off mute")
        status = scene.wait_closed()
        assert status["outcome"] in ("interrupted", "tripped"), status
        assert scene.result()["verdict"] != "pass"
        gone = scene.tick_now()
        wait(lambda: scene.tick_now() > gone + 10_000, "a second of silence")
        assert_stays_off([line for line in scene.truth.states if line["tick"] > gone])
