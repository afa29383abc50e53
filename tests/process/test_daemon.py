"""The daemon as a whole: passive at its start, a fault of the port or socket told before anything else."""

import os

import pytest

from tests.process.judge import OFF, assert_never_released
from tests.process.scene import QUICK, Scene, plan_text, wait


def test_passive_until_asked() -> None:
    """A daemon that nobody asks for anything releases nothing, and reports state, contacts and readback."""
    with Scene() as scene:
        scene.start_standin()
        scene.start_daemon()
        shot = wait(lambda: (s := scene.snapshot()).get("link") == "greeted" and s.get("reading") and s, "the greeting")
        assert shot["permission"] == "idle"
        assert "restarted" in shot["latched"]
        assert {view["name"] for view in shot["inputs"]}
        until = scene.tick_now() + 10_000
        wait(lambda: scene.tick_now() > until, "a second")
        assert_never_released(scene.truth.states)


def test_arm_needs_the_press_and_cancel_voids_it() -> None:
    """An armed run without a press stays off; cancelled, a press later does nothing."""
    with Scene() as scene:
        scene.start_standin()
        scene.start_daemon()
        scene.ready()
        scene.open_run(plan_text(QUICK))
        scene.arm()
        assert scene.call("cancel")["cancelled"] == scene.run_id
        assert scene.wait_closed()["outcome"] == "cancelled"
        scene.control("press 0.4")
        until = scene.tick_now() + 40_000
        wait(lambda: scene.tick_now() > until, "longer than a warning")
        assert_never_released(scene.truth.states)
        assert not any(line["relay"] for line in scene.truth.states)


def test_two_runs_in_one_daemon() -> None:
    """A second run of the same daemon has its own folder and arm; descriptors and threads do not pile up."""
    with Scene() as scene:
        scene.start_standin()
        daemon = scene.start_daemon()
        scene.ready()
        counts = []
        for specimen in ("S-1", "S-2"):
            scene.energise(plan_text(QUICK), specimen=specimen)
            assert scene.wait_closed()["outcome"] == "finished"
            counts.append((len(os.listdir(f"/proc/{daemon.pid}/fd")), len(os.listdir(f"/proc/{daemon.pid}/task"))))
        assert counts[1] == counts[0], counts
        assert len(list(scene.runs.glob("*/manifest.sha256"))) == 2
        assert len(scene.truth.events("press")) == 2


@pytest.mark.parametrize("outside", ["interlock open", "fault on auxiliary-low"])
def test_contacts_trip(outside: str) -> None:
    """An opened interlock and lost auxiliary supplies end a run, latched."""
    with Scene() as scene:
        scene.start_standin()
        scene.start_daemon()
        scene.ready()
        scene.energise(plan_text(QUICK.replace("for: 1 s, at_most: 5 s", "for: 60 s, at_most: 90 s")))
        scene.wait_volts(4500.0)
        scene.control(outside)
        status = scene.wait_outcome()
        assert status["outcome"] == "tripped", status
        wait(lambda: scene.truth.last["mcu"] == OFF, "off")
        assert scene.truth.last["causes"]
        assert not scene.truth.last["relay"]
        if "auxiliary" not in outside:
            assert "interlock" in status["why"], status["why"]
