"""kill -9 of the daemon: the MCU lowers by itself, the record says interrupted, nothing resumes (S4, S8)."""

import time

import pytest

from tests.process.figures import figure
from tests.process.judge import ENERGISED, OFF, assert_lowered, assert_stays_off
from tests.process.scene import DOWN_SLEW, LEASE_S, LOWER_MAX_S, RAMP_THEN_HOLD, SLOW_RAMP, Scene, plan_text, wait


def restart_and_judge(scene: Scene, name: str) -> None:
    """A new daemon is passive, reports, has closed the run as interrupted, and the bench stays off."""
    begun_s = time.monotonic()
    from_tick = scene.truth.last["tick"]
    scene.start_daemon()
    shot = wait(lambda: (s := scene.snapshot()).get("link") == "greeted" and s.get("reading") and s, "the greeting")
    figure(f"{name}: restart to passive and reporting", time.monotonic() - begun_s, "s")
    assert shot["permission"] == "idle"
    result = scene.result()
    assert result["outcome"] == "interrupted"
    assert result["verdict"] != "pass"
    wait(lambda: "was left open: closed as interrupted" in scene.daemon.err, "the daemon's word")
    # more than a lease and a warning later still nothing has moved
    until_tick = scene.tick_now() + 10_000
    wait(lambda: scene.tick_now() > until_tick, "a second of silence")
    assert scene.status()["snapshot"]["permission"] == "idle"
    assert_stays_off([line for line in scene.truth.states if line["tick"] > from_tick])


@pytest.mark.parametrize(("phase", "steps"), [("ramp", SLOW_RAMP), ("hold", RAMP_THEN_HOLD)], ids=["ramp", "hold"])
def test_killed_while_energised(phase: str, steps: str) -> None:
    """A daemon killed in a ramp or a hold is lowered after within the lease, and its record is recovered."""
    with Scene() as scene:
        scene.start_standin()
        scene.start_daemon()
        scene.ready()
        scene.energise(plan_text(steps))
        scene.wait_volts(4200.0)
        scene.wait_phase(phase)
        scene.daemon.kill()
        gone = scene.tick_now()
        assert scene.truth.last["mcu"] == ENERGISED
        wait(lambda: scene.truth.last["mcu"] == OFF, "the MCU's own cut")
        lower_s, zero_s = assert_lowered(scene.truth, gone, lease_s=LEASE_S, slew_words_per_s=DOWN_SLEW,
                                         lower_max_s=LOWER_MAX_S)
        figure(f"kill -9 in {phase}: to lowering", lower_s, "s")
        figure(f"kill -9 in {phase}: to zero and cut", zero_s, "s")
        restart_and_judge(scene, f"kill -9 in {phase}")


def test_killed_in_discharge() -> None:
    """A daemon killed while it follows a discharge leaves the bench off and a record that says interrupted."""
    with Scene() as scene:
        scene.start_standin(bleed="2 GΩ")
        scene.start_daemon()
        scene.ready()
        scene.energise(plan_text(RAMP_THEN_HOLD))
        scene.wait_volts(6000.0)
        scene.client().call("cut")
        wait(lambda: scene.truth.last["mcu"] == OFF, "the cut")
        wait(lambda: scene.status()["stage"] == "discharging", "the discharge")
        scene.daemon.kill()
        gone = scene.tick_now()
        assert scene.standin_status()["v"] > 1000.0
        restart_and_judge(scene, "kill -9 in discharge")
        assert_stays_off([line for line in scene.truth.states if line["tick"] > gone])
