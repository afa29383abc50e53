"""The plant in one object: supply, cable, specimen, measuring chain, contacts, faults.

Interface towards the MCU (time in seconds, forward only):

``advance(dt_s, v_cmd, i_cmd)``  let ``dt_s`` pass with these volts at the programming inputs
                                 (``word * params.v_dac.volts_per_code``); any dt_s > 0, 0.1 ms to 10 ms sensible
``drive(inhibit, clear, relay)`` the MCU's outputs; True, True, False is what the wiring does without an MCU
``inputs()``                     physical bits of ``vocabulary.Inputs`` (not LEASE, not PROVEN)
``sample()``                     one conversion of both monitors, raw integer codes
``events``                       the last ``PlantEvent``s, for the truth; its owner clears them
``v_true``, ``i_true``           volts at the specimen and amps in the return now, oriented; ``power``: supply powered
``faults``                       the ``FaultBook``: its owner acts on the wire's and the MCU's

The voltage on one node (output, cable and, behind the tip resistor, specimen) obeys
C dv/dt = i - G v + s, with i the supply's current (0 to its limit), G every conductance, s what the absorbed charge
drives back.  Within a step i is constant or v follows the reference, so each step is a closed form.  An arc splits the
node at the tip resistor and is stepped by 20 us until it burns steadily.
"""

from collections import deque
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from math import exp

from hvhost.standin.chain import Chain
from hvhost.standin.faults import FAULTS, FaultBook, Place
from hvhost.standin.panel import Wiring
from hvhost.standin.params import PlantParams
from hvhost.standin.specimen import Specimen
from hvhost.standin.supply import Supply

ARC_STEP_S = 20e-6
STEADY_V = 0.5  # an arc this near to its final voltage is stepped as a whole
DEAD_V = 1e-3  # below this with the supply off the node is taken as dead
EVENTS_MAX = 4096  # with no truth written nobody clears them
PLANT_PLACES = frozenset({Place.CHAIN, Place.CONTACT, Place.SUPPLY, Place.LOAD})


@dataclass(frozen=True, slots=True, kw_only=True)
class PlantEvent:
    """Something that happened in the plant: true time, kind ('arc', 'quench', 'power on', ...), a number with it."""

    t_s: float
    kind: str
    value: float = 0.0
    detail: str = ""


class Plant:
    """See the module's text.  Deterministic from ``seed`` and the calls."""

    __slots__ = ("_c", "_c_inside", "_c_node", "_decay", "_decay_key", "_g", "_g_inside", "_known", "_live",
                 "_ripple_v", "_seen", "_tape", "_was_power", "chain", "contacts", "events", "faults", "i_true",
                 "params", "specimen", "supply", "t_s", "v_node", "v_true")

    def __init__(self, params: PlantParams, seed: int, faults: FaultBook | None = None) -> None:
        self.params = params
        self.faults = faults if faults is not None else FaultBook()
        self.supply = Supply(params)
        self.specimen = Specimen(params.specimen, seed)
        self.chain = Chain(params, seed)
        self.contacts = Wiring(params.contacts, seed)
        self.events: deque[PlantEvent] = deque(maxlen=EVENTS_MAX)
        self.t_s = self.v_node = self.v_true = self.i_true = 0.0
        self._ripple_v = 0.0
        self._decay, self._decay_key = 1.0, (0.0, 0.0)
        self._was_power = False
        self._seen = -1
        self._tape: Iterator[tuple[int, int]] | None = None
        self._known: dict[str, float] = {}
        self._settle()

    # ------------------------------------------------------------ the MCU's side

    def drive(self, inhibit: bool, clear: bool, relay: bool) -> None:
        """Take the MCU's outputs."""
        if (inhibit, clear, relay) != self.contacts.wanted:
            self.contacts.drive(self.t_s, inhibit, clear, relay, self.params.supply.inhibit_s)

    def inputs(self) -> int:
        """Return the physical bits of `vocabulary.Inputs`."""
        return self.contacts.bits

    def sample(self) -> tuple[int, int]:
        """Convert both monitors now."""
        codes = self.chain.convert(self.t_s, self._ripple_v, self._was_power)
        if self._tape is not None and not self.contacts.inhibit:
            codes = next(self._tape, codes)
        if self.faults.active:
            for name in ("v-spike", "i-spike", "v-dip"):
                if (value := self.faults.take(name)) is not None:
                    self._event("fault on", value, name)
                    self._settle()
        return codes

    def play(self, pairs: Iterable[tuple[int, int]]) -> None:
        """Give a recording's raw codes in place of the plant's own while the output stage is released."""
        self._tape = iter(pairs)

    @property
    def power(self) -> bool:
        """Whether the supply has power."""
        return self.contacts.power

    def advance(self, dt_s: float, v_cmd: float, i_cmd: float) -> None:
        """Let ``dt_s`` pass with these volts at the programming inputs."""
        end_s = self.t_s + dt_s
        faults, contacts = self.faults, self.contacts
        while contacts.wake_s <= end_s or faults.next_s <= end_s or self.v_true >= faults.next_v:
            due_s = self.t_s if self.v_true >= faults.next_v else max(min(contacts.wake_s, faults.next_s), self.t_s)
            if due_s > self.t_s:
                self._flow(due_s - self.t_s, v_cmd, i_cmd)
                self.t_s = due_s
            faults.step(due_s, self.v_true)
            contacts.move(due_s)
            self._contacts_moved()
        if faults.version != self._seen:
            self._settle()
        rest_s = end_s - self.t_s
        if rest_s > 0.0:
            self._flow(rest_s, v_cmd, i_cmd)
        self.t_s = end_s

    # ------------------------------------------------------------ acts at the bench

    def press(self, seconds: float = 0.5) -> None:
        """Press the arm input for so long."""
        self.contacts.press(self.t_s, seconds)
        self._event("press", seconds)

    def interlock(self, closed: bool) -> None:
        """Close or open the interlock loop."""
        self.contacts.set_interlock(self.t_s, closed)
        self._event("interlock closed" if closed else "interlock open")
        self._contacts_moved()

    def emergency(self, closed: bool) -> None:
        """Release (True) or operate (False) the emergency contact."""
        self.contacts.set_emergency(self.t_s, closed)
        self._event("emergency released" if closed else "emergency operated")
        self._contacts_moved()

    def ground(self, on: bool) -> None:
        """Lay the grounding device on the output, or take it off."""
        self.contacts.set_ground(on)
        self._event("ground on" if on else "ground off")
        self._refresh()

    def outside_reset(self) -> bool:
        """Press the hard-wired circuit's reset outside the area; True when its contactor holds."""
        held = self.contacts.outside_reset()
        self._event("reset outside", float(held))
        self._contacts_moved()
        return held

    def new_specimen(self) -> None:
        """Put in the next specimen of the same make."""
        self.specimen.renew()
        self._event("specimen", self.specimen.strength_v)
        self._settle()

    # ------------------------------------------------------------ physics

    def _flow(self, dt_s: float, v_cmd: float, i_cmd: float) -> None:
        live = self._live
        supply, specimen = self.supply, self.specimen
        supply.step(dt_s, v_cmd, i_cmd, live, self.contacts.clear and self.params.supply.clear_input)
        v0 = self.v_node
        if not live and -DEAD_V < v0 < DEAD_V and not any(specimen.u):
            self.v_node = self.v_true = self.i_true = 0.0
            self.chain.step(dt_s, v0, 0.0, 0.0)
            return
        if specimen.arcing:
            self._flow_arc(dt_s)
            return
        source_a = specimen.source_a()
        v1 = self._solve(dt_s, v0, source_a)
        middle = 0.5 * (v0 + v1)
        specimen.absorb(dt_s, middle)
        # what leaves the supply through its return: all but its own capacitor and bleed resistor
        outside_a = (self._c - self._c_inside) * (v1 - v0) / dt_s + (self._g - self._g_inside) * middle - source_a
        self.v_node = self.v_true = v1
        self.i_true = outside_a
        self.chain.step(dt_s, v0, v1, outside_a)
        if live:
            ripple = self.params.supply
            self._ripple_v = ripple.ripple_v + ripple.ripple_v_per_a * outside_a if v1 > 1.0 else 0.0
        if v1 >= specimen.hazard_v and specimen.strikes(dt_s, v1):
            self._strike(self.t_s + dt_s)
        if specimen.off_s < 1.0:
            specimen.off_s += dt_s

    def _solve(self, dt_s: float, v0: float, source_a: float) -> float:
        """Voltage of the node after ``dt_s``: at the reference if the supply can, else by its limit or by itself."""
        g, c = self._g, self._c
        supply = self.supply
        reference = supply.reference_v
        limit_a = supply.limit_a
        if self._live and reference > 0.0:
            asked_a = c * (reference - v0) / dt_s + g * 0.5 * (reference + v0) - source_a
            if 0.0 <= asked_a <= limit_a:
                return reference
        else:
            asked_a = limit_a = 0.0
        if self._decay_key != (dt_s, g):
            self._decay_key = (dt_s, g)
            self._decay = exp(-dt_s * g / c)
        # v_inf = (i + s) / G; v = v_inf + (v0 - v_inf) exp(-dt G / C); one quadrant: i is never negative
        if asked_a > limit_a:
            v_inf = (limit_a + source_a) / g
            v1 = v_inf + (v0 - v_inf) * self._decay
            return v1 if v1 < reference or v0 > reference else reference
        v_inf = source_a / g
        return v_inf + (v0 - v_inf) * self._decay

    def _flow_arc(self, dt_s: float) -> None:
        p, specimen, supply = self.params, self.specimen, self.supply
        tau_s = p.tip_ohm * self._c_node
        left_s = dt_s
        while left_s > 1e-12:
            v0 = self.v_node
            limit_a = supply.limit_a if self._live else 0.0
            v_inf = p.specimen.arc_v + limit_a * p.tip_ohm
            if self._live and v_inf > supply.reference_v > p.specimen.arc_v:
                v_inf = supply.reference_v
            h = left_s if abs(v0 - v_inf) < STEADY_V else min(left_s, ARC_STEP_S)
            left_s -= h
            v1 = v_inf + (v0 - v_inf) * exp(-h / tau_s)
            supply_a = max(0.0, min(limit_a, (v_inf - p.specimen.arc_v) / p.tip_ohm))
            arc_a = supply_a - self._c_node * (v1 - v0) / h
            self.i_true = supply_a - self._c_inside * (v1 - v0) / h
            self.v_node = v1
            self.v_true = min(p.specimen.arc_v, v1)
            seen = (self.v_true, self.v_true) if p.chain.at_specimen else (v0, v1)
            self.chain.step(h, *seen, self.i_true)
            specimen.absorb(h, self.v_true)
            if specimen.burn(h, arc_a):
                self._quench(self.t_s + dt_s - left_s)
                if left_s > 1e-12:
                    self._flow_rest(left_s)
                return

    def _flow_rest(self, dt_s: float) -> None:
        """The rest of a step after an arc went out in it; the reference has moved for the whole step already."""
        specimen = self.specimen
        source_a = specimen.source_a()
        v0 = self.v_node
        v1 = self._solve(dt_s, v0, source_a)
        self.i_true = (self._c - self._c_inside) * (v1 - v0) / dt_s + (self._g - self._g_inside) * v1 - source_a
        self.v_node = self.v_true = v1
        self.chain.step(dt_s, v0, v1, self.i_true)
        specimen.off_s += dt_s
        if v1 >= specimen.hazard_v and specimen.strikes(dt_s, v1):
            self._strike(self.t_s + dt_s)

    def _strike(self, t_s: float, forced: bool = False) -> None:
        specimen = self.specimen
        kind = "restrike" if specimen.off_s < 1.0 else "arc"
        specimen.strike(self.v_node, forced)
        self.events.append(PlantEvent(t_s=t_s, kind=kind, value=self.v_node))
        self.v_true = min(self.v_node, self.params.specimen.arc_v)

    def _quench(self, t_s: float) -> None:
        specimen = self.specimen
        self.events.append(PlantEvent(t_s=t_s, kind="quench", value=specimen.arc_energy_j))
        specimen.quench()
        # the specimen's capacitance, at the burning voltage, shares the node's charge
        c_s = specimen.capacitance_f
        self.v_node = (self._c_node * self.v_node + c_s * self.v_true) / (self._c_node + c_s)
        self.v_true = self.v_node
        specimen.settle(self.faults.active)
        self._refresh()

    def _force_arc(self) -> None:
        if not self.specimen.arcing and self.v_node > self.params.specimen.arc_v and self.specimen.connected:
            self._strike(self.t_s, forced=True)

    # ------------------------------------------------------------ changes

    def _event(self, kind: str, value: float = 0.0, detail: str = "") -> None:
        self.events.append(PlantEvent(t_s=self.t_s, kind=kind, value=value, detail=detail))

    def _settle(self) -> None:
        """Look at the faults again: something was switched on or off."""
        book = self.faults
        for name in [*self._known, *book.active]:
            if self._known.get(name) != book.active.get(name) and not FAULTS[name].once:
                on = name in book.active
                self._event("fault on" if on else "fault off", book.active.get(name, 0.0), name)
        self._known = dict(book.active)
        for name in ("arc", "arc-burst", "dip"):
            value = book.take(name)
            if value is not None:
                self._load_fault(name, value)
        self._seen = book.version
        active = {name: value for name, value in book.active.items() if FAULTS[name].place in PLANT_PLACES}
        self.supply.settle(active)
        self.specimen.settle(active)
        if self.specimen.arcing and not self.specimen.connected:
            self._quench(self.t_s)
        self.chain.settle(active, self.t_s)
        self.contacts.settle(active, self.t_s)
        self._contacts_moved()

    def _load_fault(self, name: str, value: float) -> None:
        self._event("fault on", value, name)
        if name == "dip":
            self.v_node *= value
            self.v_true = self.v_node
            return
        if name == "arc-burst":
            self.specimen.burst = max(int(value), 1)
        self._force_arc()

    def _contacts_moved(self) -> None:
        power = self.contacts.power
        if power != self._was_power:
            self._was_power = power
            self._event("power on" if power else "power off", self.v_true)
        self._refresh()

    def _refresh(self) -> None:
        """Sum up capacitances and conductances, and whether the output stage is live."""
        p, specimen, contacts = self.params, self.specimen, self.contacts
        self._live = contacts.power and not contacts.inhibit
        if not self._live:
            self._ripple_v = 0.0
        self._c_inside = p.supply.output_f
        self._c_node = p.supply.output_f + p.cable_f
        self._c = self._c_node + specimen.capacitance_f
        self._g_inside = 1.0 / p.supply.bleed_ohm
        self._g = (self._g_inside + 1.0 / (p.chain.high_ohm + p.chain.low_ohm) + specimen.conductance_s
                   + specimen.branch_s + (1.0 / p.contacts.ground_ohm if contacts.shorted else 0.0))
