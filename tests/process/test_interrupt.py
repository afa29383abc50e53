"""Ctrl-C on ``hvhost run``: the first lowers and says so, the second cuts."""

import signal

import pytest

from tests.process.judge import ENERGISED, LOWERING, OFF
from tests.process.scene import RAMP_THEN_HOLD, Child, Scene, plan_text, wait

BY_REQUEST, LOWERED_TO_ZERO = 1, 3  # why of a cut, PROTOCOL.md section 8


def running(scene: Scene) -> Child:
    """``hvhost run`` in the background, pressed for, in its hold."""
    scene.start_standin()
    scene.start_daemon()
    scene.ready()
    scene.call("seat.release")
    plan = scene.folder / "plan.yaml"
    plan.write_text(plan_text(RAMP_THEN_HOLD), encoding="utf-8")
    command = scene.child("run", "run", str(plan), "--specimen", "S-1", "--reason", "scenario", "--socket",
                          scene.socket)
    wait(lambda: scene.snapshot().get("permission") == "requested" or scene._ended(command), "the request")
    scene.control("press 0.4")
    scene.wait_volts(7000.0)
    assert scene.truth.last["mcu"] == ENERGISED
    return command


@pytest.mark.parametrize("times", [1, 2])
def test_interrupt(times: int) -> None:
    """Once lowers to zero, twice cuts from where the lowering stands; the exit code is 'interrupted'."""
    with Scene() as scene:
        command = running(scene)
        command.signal(signal.SIGINT)
        wait(lambda: scene.truth.last["mcu"] == LOWERING, "the lowering")
        assert "lowering; Ctrl-C once more cuts" in command.err
        if times == 2:
            command.signal(signal.SIGINT)
        wait(lambda: scene.truth.last["mcu"] == OFF, "off")
        cut = scene.truth.events("cut")[-1]
        if times == 2:
            assert cut["value"] == BY_REQUEST
            assert "cutting" in command.err
        else:
            assert cut["value"] == LOWERED_TO_ZERO
        assert command.wait_end() == 7, command.out + command.err
        assert "Traceback" not in command.err
        assert not scene.truth.last["causes"]


def test_daemon_told_to_end() -> None:
    """SIGTERM of the daemon in mid-run lowers first, closes the run, and leaves no socket."""
    with Scene() as scene:
        command = running(scene)
        scene.daemon.signal(signal.SIGTERM)
        wait(lambda: scene.truth.last["mcu"] == LOWERING, "the lowering")
        assert scene.daemon.wait_end() == 0, scene.daemon.err
        assert scene.truth.last["mcu"] == OFF
        assert "lowering before the daemon ends" in scene.daemon.err
        assert not scene.truth.first(lambda line: line["v_word"] > 0, scene.truth.last["tick"])
        assert scene.result()["outcome"] in ("interrupted", "lowered")
        assert command.wait_end() in (6, 7), command.err
        assert "Traceback" not in command.err + scene.daemon.err
        assert sorted(path.name for path in scene.folder.glob("*.sock")) == ["s.sock"]
