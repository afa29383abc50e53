"""The port goes and comes back: lowered meanwhile, the run is interrupted, the new session resumes nothing (S4, S8)."""

import os

import pytest

from tests.process.figures import figure
from tests.process.judge import ENERGISED, OFF, assert_lowered, assert_stays_off
from tests.process.relay import PtyRelay, Relay, TcpRelay
from tests.process.scene import DOWN_SLEW, LEASE_S, LOWER_MAX_S, RAMP_THEN_HOLD, Scene, plan_text, wait


@pytest.mark.parametrize("kind", ["pty", "tcp"])
def test_unplugged_and_plugged(kind: str) -> None:
    """With the stand-in running on behind the cable, a pulled and replugged port leaves the bench off."""
    with Scene() as scene:
        device = scene.start_standin(tcp=kind == "tcp")
        relay: Relay = TcpRelay(device) if kind == "tcp" else PtyRelay(device, scene.folder / "port")
        with relay:
            scene.start_daemon(relay.device)
            scene.ready()
            descriptors = count_descriptors(scene.daemon.pid)
            scene.energise(plan_text(RAMP_THEN_HOLD))
            scene.wait_volts(5000.0)
            relay.unplug()
            gone = scene.tick_now()
            assert scene.truth.last["mcu"] == ENERGISED
            wait(lambda: scene.snapshot()["link"] == "lost", "the daemon's word")
            assert scene.snapshot()["voltage"] == "unknown"
            wait(lambda: scene.truth.last["mcu"] == OFF, "the MCU's own cut")
            lower_s, zero_s = assert_lowered(scene.truth, gone, lease_s=LEASE_S, slew_words_per_s=DOWN_SLEW,
                                             lower_max_s=LOWER_MAX_S)
            figure(f"{kind} unplugged: to lowering", lower_s, "s")
            figure(f"{kind} unplugged: to zero and cut", zero_s, "s")
            status = scene.wait_closed()
            assert status["outcome"] == "interrupted"
            relay.plug()
            wait(lambda: (s := scene.snapshot())["link"] == "greeted" and s["reading"], "the link's return")
            assert scene.snapshot()["permission"] == "idle"
            assert "is back" in scene.daemon.err
            later = scene.tick_now() + 10_000
            wait(lambda: scene.tick_now() > later, "a second of silence")
            assert_stays_off([line for line in scene.truth.states if line["tick"] > gone + 50_000])
            assert count_descriptors(scene.daemon.pid) <= descriptors


def count_descriptors(pid: int) -> int:
    """How many descriptors a process has open."""
    return len(os.listdir(f"/proc/{pid}/fd"))
