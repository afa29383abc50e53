"""Programs and a driver for the runner: the MCU as the runner knows it, without wire or plant."""

from typing import Any

from hvhost.plan.program import HoldStep, Pause, Program, RampStep, RestStep, Retreat, Step
from hvhost.supervisor.notes import Measured, Note, What
from hvhost.supervisor.runner import Runner
from tests.supervisor.lab import DEMO

HZ = 10_000
BLOCK = 320  # ticks of a block of 32 samples


def ramp(to_v: float, number: int = 0, **more: Any) -> RampStep:
    """A ramp at 4 kV/s."""
    return RampStep(**{"number": number, "name": f"ramp {number}", "place": "plan:1", "to_v": to_v,
                       "slew_v_per_s": 4e3, "limit_a": 2e-3, **more})


def hold(v: float, hold_s: float, number: int = 1, **more: Any) -> HoldStep:
    """A hold with a window of 0.1 s and 1 %."""
    return HoldStep(**{"number": number, "name": f"hold {number}", "place": "plan:2", "v": v, "limit_a": 2e-3,
                       "hold_s": hold_s, "at_most_s": 60.0, "tolerance": 0.01, "window_s": 0.1, **more})


def rest(rest_s: float, number: int = 1) -> RestStep:
    """A rest."""
    return RestStep(number=number, name=f"rest {number}", place="plan:3", rest_s=rest_s)


def program(*steps: Step, kind: str = "plan", pause: Pause | None = None, retreat: Retreat | None = None) -> Program:
    """A program of these steps."""
    return Program(kind=kind, title="test", steps=steps, reaction=pause, retreat=retreat, v_highest=20e3,
                   i_highest=4e-3, duration_s=600.0)


class Walk:
    """A runner and an obedient MCU: segments are accepted and carried out, the voltage follows the words."""

    def __init__(self, walked: Program, queue: int = 16) -> None:
        self.runner = Runner(walked, DEMO, HZ, queue)
        self.tick = self.serial = 0
        self.queue: list[tuple[int, Any]] = []  # serial, target
        self.ends: int | None = None  # of the segment under way
        self.words = (0, 0)
        self.volts: float | None = None  # shown instead of the words
        self.arcs: list[int | None] = []
        self.notes: list[Note] = []
        self.paused = False

    def energise(self) -> "Walk":
        """The warning, then the first segment."""
        self.runner.begin()
        self.take()
        self.runner.energised(self.tick, self.tick // 10)
        self.take()
        return self

    def take(self) -> None:
        """Accept what is ordered, collect what is noted."""
        self.notes += self.runner.take_notes()
        for order in self.runner.orders():
            if self.paused:
                assert order.arc is not None, "the first segment after a pause carries the arc"
                self.paused = False
            self.arcs.append(order.arc)
            self.serial += 1
            self.queue.append((self.serial, order.target))
            self.runner.accepted(self.serial, order.stretch)
        self.notes += self.runner.take_notes()

    def arc(self, number: int) -> "Walk":
        """The MCU pauses."""
        self.queue.clear()
        self.ends, self.words, self.paused = None, (0, 0), True
        self.runner.paused(number, self.tick, self.tick // 10)
        self.take()
        return self

    def block(self) -> None:
        """One block passes."""
        end = self.tick + BLOCK
        while not self.paused:
            if self.ends is None:
                if not self.queue:
                    break
                serial, target = self.queue[0]
                self.runner.segment_started(serial, self.tick)
                self.ends = self.tick + target.ticks
                self.take()
            if self.ends > end:
                break
            serial, target = self.queue.pop(0)
            self.words, done, self.ends = (target.v, target.i), self.ends, None
            if self.queue:
                serial, following = self.queue[0]
                self.runner.segment_started(serial, done)
                self.ends = done + following.ticks
            else:
                self.runner.ran_dry(serial, done, done // 10)
            self.take()
        volts = self.volts if self.volts is not None else DEMO.voltage.program.value(self.words[0])
        self.runner.block(Measured(index=self.tick // 10, tick=self.tick, ticks=BLOCK, pairs=32, volts=volts,
                                   amps=1e-6, volts_max=volts))
        self.tick = end
        self.take()

    def pass_s(self, seconds: float) -> "Walk":
        """Let time pass."""
        for _ in range(round(seconds * HZ / BLOCK)):
            self.block()
        return self

    def told(self, what: What) -> list[Note]:
        """The notes of a kind."""
        return [note for note in self.notes if note.what is what]
