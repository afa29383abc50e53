"""Wiring around the supply: relay, hard-wired interlock, danger signal, grounding device, arm input, read-backs.

Two contacts stand in series in the supply's mains.  The MCU's relay closes one, where there is one.  The interlock
loop and the emergency contact, in series, hold the other, a contactor that latches open until somebody resets it
outside.  The danger signal burns from behind both, so it tells what no computer can pretend.
"""

from collections.abc import Mapping
from heapq import heappop, heappush
from math import inf
from random import Random

from hvhost.standin.params import ContactParams
from hvhost.wire.vocabulary import Inputs

_BIT = {bit.name: int(bit) for bit in Inputs}


class Wiring:
    """State of every contact.  ``wake_s`` is when the next of them moves; ``move(t_s)`` lets them."""

    __slots__ = ("_due", "_faults", "_order", "_params", "_rng", "arm_pressed", "bits", "clear", "contactor",
                 "emergency_closed", "ground_on", "inhibit", "interlock_closed", "mains", "power", "relay",
                 "relay_coil", "reset_needed", "wake_s", "wanted")

    def __init__(self, params: ContactParams, seed: int) -> None:
        self._params, self._rng = params, Random(f"contacts {seed}")
        self._due: list[tuple[float, int, str, bool]] = []
        self._order = 0
        self._faults: Mapping[str, float] = {}
        self.wake_s = inf
        self.inhibit = self.clear = True  # what the output stage sees; the wiring asserts both without an MCU
        self.relay = self.relay_coil = False
        self.wanted = (True, True, False)  # inhibit, clear, relay as last driven
        self.interlock_closed = self.emergency_closed = self.contactor = self.mains = True
        self.ground_on = self.reset_needed = self.arm_pressed = False
        self.power = False
        self.bits = 0
        self.settle({})

    def drive(self, t_s: float, inhibit: bool, clear: bool, relay: bool, inhibit_s: float) -> None:
        """Take the MCU's outputs; the relay needs its time, so does the inhibit line at the output stage."""
        was = self.wanted
        self.wanted = (inhibit, clear, relay)
        if inhibit != was[0] or clear != was[1]:
            self._at(t_s + inhibit_s, "lines", True)
        if relay != was[2]:
            self.relay_coil = relay
            self._at(t_s + (self._params.relay_operate_s if relay else self._params.relay_release_s), "relay", relay)

    def press(self, t_s: float, seconds: float) -> None:
        """Press the arm input for so long, with the bounce of a real contact at both edges."""
        bounce_s = self._faults.get("arm-bounce", self._params.bounce_s)
        for edge_s, level in ((t_s, True), (t_s + max(seconds, 0.0), False)):
            self._at(edge_s, "arm", level)
            steps = sorted(self._rng.uniform(0.0, bounce_s) for _ in range(4))
            for number, step_s in enumerate(steps):
                self._at(edge_s + step_s, "arm", level if number % 2 else not level)

    def set_interlock(self, t_s: float, closed: bool) -> None:
        """Open or close the interlock loop (both contacts of it)."""
        self.interlock_closed = closed
        self._loop(t_s)

    def set_emergency(self, t_s: float, closed: bool) -> None:
        """Operate (False) or release (True) the emergency contact."""
        self.emergency_closed = closed
        self._loop(t_s)

    def outside_reset(self) -> bool:
        """Press the manual reset outside the area; True when the contactor closed."""
        if self._loop_closed():
            self.contactor, self.reset_needed = True, False
            self._read()
        return self.contactor

    def settle(self, faults: Mapping[str, float], t_s: float = 0.0) -> None:
        """Take the faults that are on and put every contact where they leave it."""
        loop_moved = ("interlock-open" in faults) != ("interlock-open" in self._faults)
        self._faults = dict(faults)
        self.mains = "mains-lost" not in faults
        if "relay-dead" in faults:
            self.relay = False
        elif "relay-welded" not in faults and not any(what == "relay" for _, _, what, _ in self._due):
            self.relay = self.relay_coil
        waiting = {what for _, _, what, _ in self._due}
        if self.reset_needed and "contactor-welded" not in faults and "contactor" not in waiting:
            self.contactor = False
        if loop_moved:
            self._loop(t_s)
        self._lines()
        self._read()

    def move(self, t_s: float) -> None:
        """Let every contact that is due by ``t_s`` move."""
        while self._due and self._due[0][0] <= t_s:
            _, _, what, level = heappop(self._due)
            if what == "lines":
                self._lines()
            elif what == "relay":
                held = (level and "relay-dead" in self._faults) or (not level and "relay-welded" in self._faults)
                if not held and level == self.relay_coil:
                    self.relay = level
            elif what == "contactor":
                if not self._loop_closed() or self.reset_needed:
                    self.contactor = self.contactor and "contactor-welded" in self._faults
            else:
                self.arm_pressed = level
        self.wake_s = self._due[0][0] if self._due else inf
        self._read()

    def _at(self, t_s: float, what: str, level: bool) -> None:
        self._order += 1
        heappush(self._due, (t_s, self._order, what, level))
        self.wake_s = self._due[0][0]

    def _loop_closed(self) -> bool:
        return self.interlock_closed and self.emergency_closed and "interlock-open" not in self._faults

    def _loop(self, t_s: float) -> None:
        if not self._loop_closed():
            self.reset_needed = self._params.interlock_latches
            self._at(t_s + self._params.contactor_release_s, "contactor", False)
        elif not self.reset_needed:
            self.contactor = True
        self._read()

    def _lines(self) -> None:
        inhibit, clear, _ = self.wanted
        fitted = self._params.inhibit
        self.inhibit = inhibit and fitted and "inhibit-dead" not in self._faults and "inhibit-lies" not in self._faults
        self.clear = clear and "clear-dead" not in self._faults

    def _read(self) -> None:
        faults = self._faults
        self.power = (self.relay or not self._params.relay) and self.contactor and self.mains
        grounded = (self.ground_on or "ground-on" in faults or "ground-contact" in faults)
        inhibit_back = bool(faults.get("inhibit-back-stuck", self.inhibit or (
            "inhibit-lies" in faults and self.wanted[0])))
        relay_back = bool(faults.get("relay-back-stuck", self.relay))
        danger = (self.power or "danger-lit" in faults) and "danger-dark" not in faults
        levels = {
            "INTERLOCK": self.interlock_closed and "interlock-open" not in faults,
            "EMERGENCY": self.emergency_closed,
            "GROUND_OPEN": not grounded,
            "DANGER": danger,
            "AUXILIARY": "auxiliary-low" not in faults,
            "ARM_INPUT": self._params.arm_input and (self.arm_pressed or "arm-stuck" in faults),
            "INHIBIT_BACK": inhibit_back,
            "RELAY_BACK": relay_back,
            "POLARITY": "polarity-wrong" not in faults,
        }
        self.bits = sum(_BIT[name] for name, level in levels.items() if level)

    @property
    def shorted(self) -> bool:
        """Whether the grounding device lies on the output."""
        return self.ground_on or "ground-on" in self._faults or "ground-lies" in self._faults

    def set_ground(self, on: bool) -> None:
        """Lay the grounding device on the output or take it off."""
        self.ground_on = on
        self._read()
