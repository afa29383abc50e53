"""A daemon whose bytes come late: what it judges is older and older, and the lease goes with it (S4)."""

import time

from tests.process.figures import figure
from tests.process.judge import ENERGISED, HOST_RULE, HOST_SILENT, LOWERING, OFF, assert_words_never_rise
from tests.process.relay import PtyRelay
from tests.process.scene import LEASE_S, RAMP_THEN_HOLD, Scene, plan_text, wait

SLIP = 0.5  # seconds of delay gained per second


def test_delay_beyond_the_lease() -> None:
    """Blocks that come in order and without a gap, but ever later, end the run before they are a lease late."""
    with Scene() as scene:
        device = scene.start_standin()
        with PtyRelay(device, scene.folder / "port") as relay:
            scene.start_daemon(relay.device)
            scene.ready()
            scene.energise(plan_text(RAMP_THEN_HOLD))
            scene.wait_volts(5000.0)
            assert scene.truth.last["mcu"] == ENERGISED
            begun_s, begun = time.monotonic(), scene.tick_now()
            relay.delay_s = lambda: min(0.9, SLIP * (time.monotonic() - begun_s))
            wait(lambda: scene.truth.last["mcu"] in (LOWERING, OFF), "the end of energised")
            ended = scene.truth.first(lambda line: line["mcu"] in (LOWERING, OFF), begun - 100)
            assert ended is not None
            late_s = (ended["tick"] - begun) / scene.truth.tick_hz
            # the delay is one lease after two, and the last sample judged in time then carries the lease on
            assert late_s <= LEASE_S / SLIP + LEASE_S + 0.05, late_s
            figure("delay growing by half: to the end of energised", late_s, "s")
            wait(lambda: scene.truth.last["mcu"] == OFF, "the cut")
            causes = scene.truth.last["causes"]
            assert causes & (HOST_SILENT | HOST_RULE), causes
            assert_words_never_rise([line for line in scene.truth.states if line["tick"] >= ended["tick"]])
            relay.delay_s = lambda: 0.0
            status = scene.wait_closed()
            assert status["outcome"] in ("interrupted", "tripped"), status
            assert scene.result()["verdict"] != "pass"
