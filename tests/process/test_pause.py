"""Arc pauses that a plan declared: counted once whoever saw them, powered through, ended by what is no arc."""

import struct
from base64 import b64decode, b64encode
from itertools import pairwise

from tests.process.judge import ENERGISED, OFF, OVERCURRENT, PAUSING, Line
from tests.process.relay import PtyRelay
from tests.process.scene import Scene, plan_text, wait

PAUSE = """\
arc: {reaction: pause, count: 10, rest: 500 ms, window: 60 s}
retreat: {rest: 800 ms, back: 60 %, climb: 5 kV/s, series: 5}
"""
RISE = """\
  - ramp: {to: 5 kV, rate: 4 kV/s}
  - ramp: {name: rise, to: 14 kV, rate: 200 V/s, until: breakdown}
"""
SHEET = """\
sheet: Scenario of a gap
specimen: GAP-1
operator: scenario
connected:
  capacitance: {from: 10 pF, to: 1 nF}
confirmed: {polarity: positive, grounded_while_connecting: yes, ground_removed: yes, area_clear: yes}
"""
COLLAPSED = 8  # pairs shown as collapsed


class Liar:
    """Shows the host one collapse that the board never saw, in the next block taken while energised."""

    def __init__(self) -> None:
        self.asked = False
        self.index = -1

    def __call__(self, body: bytes) -> bytes:
        """Change one block; everything else passes."""
        if not self.asked or not body.startswith(b"b "):
            return body
        words = body.split(b" ")
        pairs = int(words[11])
        if int(words[5]) != ENERGISED or pairs < 2 * COLLAPSED:
            return body
        self.asked = False
        codes = list(struct.unpack(f"<{2 * pairs}h", b64decode(words[12])))
        self.index = int(words[1]) + pairs - COLLAPSED
        for pair in range(pairs - COLLAPSED, pairs):
            codes[2 * pair] = 20
        words[12] = b64encode(struct.pack(f"<{2 * pairs}h", *codes))
        return b" ".join(words)


def pauses(states: list[Line]) -> int:
    """How often the MCU began to pause."""
    return sum(after["mcu"] == PAUSING != before["mcu"] for before, after in pairwise(states))


def test_arcs_count_once_and_overcurrent_latches() -> None:
    """An arc of the plant and a collapse seen by the host alone are one arc each; overcurrent alone is none."""
    liar = Liar()
    with Scene(profile="gap") as scene:
        device = scene.start_standin(bleed="100 MΩ")
        with PtyRelay(device, scene.folder / "port") as relay:
            relay.rewrite = liar
            scene.start_daemon(relay.device)
            scene.ready()
            scene.energise(plan_text(RISE, specimen="specimen: self-restoring", extra=PAUSE,
                                     criterion="criterion: breakdown above, limit: 5 kV"),
                           sheet=SHEET, specimen="GAP-1")
            begun = scene.truth.first(lambda line: line["mcu"] == ENERGISED)
            scene.wait_volts(5100.0)

            scene.control("fault on arc")
            wait(lambda: scene.truth.last["mcu"] == PAUSING, "the pause")
            wait(lambda: (s := scene.snapshot())["permission"] == "pausing" and s["pause_s"] is not None, "the word")
            wait(lambda: scene.truth.last["mcu"] == ENERGISED, "the return")
            wait(lambda: scene.snapshot()["run"]["arcs"] == 1, "one arc counted")
            scene.wait_volts(1500.0)
            wait(lambda: scene.snapshot()["phase"] == "ramp", "the ramp")

            liar.asked = True
            wait(lambda: scene.truth.last["mcu"] == PAUSING, "the second pause")
            wait(lambda: scene.truth.last["mcu"] == ENERGISED, "the second return")
            wait(lambda: scene.snapshot()["run"]["arcs"] == 2, "two arcs counted")
            assert len(scene.truth.events("arc")) == 1
            scene.wait_volts(1000.0)
            wait(lambda: scene.snapshot()["phase"] == "ramp", "the ramp again")

            before = scene.tick_now()
            live = [line for line in scene.truth.states if begun["tick"] <= line["tick"] < before]
            assert pauses(live) == 2
            assert all(line["relay"] and line["power"] for line in live), "the relay opened in a pause"
            returns = [line["tick"] for line in live if line["mcu"] == ENERGISED]
            for line in live:
                # the release shows up to one sample (10 ticks) before the state that it leads to
                if line["mcu"] == PAUSING and not any(0 <= at - line["tick"] <= 10 for at in returns):
                    assert line["inhibit"], line
                    assert line["clear"], line
                    assert not line["v_word"], line

            scene.control("fault on i-offset=20000")  # above the trip, with no collapse
            wait(lambda: scene.truth.last["mcu"] == OFF, "the cut")
            after = [line for line in scene.truth.states if line["tick"] >= before]
            stop = next(line for line in after if line["inhibit"])
            off = next(line for line in after if line["mcu"] == OFF)
            assert off["tick"] - stop["tick"] <= 100, "it waits a few samples for a collapse, then latches"
            # by order, not by tick: the sample that showed the overcurrent may stand in the file at the stop's own tick
            assert all(line["inhibit"] for line in after[after.index(stop):])
            assert after[-1]["causes"] & OVERCURRENT
            assert not after[-1]["relay"]
            scene.control("fault off i-offset")
            status = scene.wait_closed()
            assert status["outcome"] == "tripped", status
            assert "overcurrent" in status["why"]
            breakdowns = scene.result()["breakdowns"]
            assert [one["arc"] for one in breakdowns] == [1, 2], breakdowns  # the overcurrent is none
            assert "host" in breakdowns[1]["seen_by"], breakdowns
            assert abs(breakdowns[1]["index"] - liar.index) <= COLLAPSED, (breakdowns, liar.index)
