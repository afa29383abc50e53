"""Faults by name, none on by default.

What must be survived (never energised without permission, dead within the stated time, nothing silently wrong in the
record), alone and together:

* converters and chain: stuck, saturated, offset, drifting, wrong sign, swapped; divider open in either arm; shunt open
  or shorted; more noise; one raised sample that means nothing; conversions missed;
* contacts: relay welded or dead; inhibit or clear without effect; read-backs that lie; danger signal dark or lit by
  itself; contactor of the interlock welded; grounding device left on, or its contact lying; arm input stuck or
  bouncing; polarity wrong; auxiliary supplies low; mains lost and back;
* supply: programming lead off, offset, a limit or a set-point that is ignored, the front panel turned down;
* load: lead off, leaking, shorted, an arc, a burst of arcs, a partial dip;
* wire: bytes lost, flipped, doubled, swapped, noise between lines, an echo, silence in either direction;
* MCU: reset, brown-out, stopped, slow to answer, clock off by so many ppm.

A fault is written ``name``, ``name=value``, ``name@12.5s`` (from this time of the plant on), ``name@8kV`` (from this
true voltage on), and ``+2s`` last ends it after so long: ``mains-lost@12.5s+0.3s``, ``v-offset=200@8kV``.
"""

import math
import re
from collections.abc import Iterable
from dataclasses import dataclass
from difflib import get_close_matches
from enum import StrEnum
from random import Random

from hvhost.words.errors import QuantityFault, UsageFault
from hvhost.words.quantities import Dimension, parse_quantity

WAITING_MAX = 256


class Place(StrEnum):
    """Where a fault sits, and so which part of the stand-in acts it out."""

    CHAIN = "chain"
    CONTACT = "contact"
    SUPPLY = "supply"
    LOAD = "load"
    WIRE = "wire"
    MCU = "mcu"


@dataclass(frozen=True, slots=True)
class Fault:
    """One fault: where, what its value means (``dimension``, ``default``), whether it happens once or stays."""

    place: Place
    doc: str
    default: float = 1.0
    dimension: Dimension = Dimension.NUMBER
    once: bool = False


_N, _S, _V, _A, _R = Dimension.NUMBER, Dimension.SECOND, Dimension.VOLT, Dimension.AMP, Dimension.OHM

FAULTS: dict[str, Fault] = {
    "v-stuck": Fault(Place.CHAIN, "voltage monitor's code stands still"),
    "i-stuck": Fault(Place.CHAIN, "current monitor's code stands still"),
    "v-saturated": Fault(Place.CHAIN, "voltage monitor at its converter's limit (-1: the lower one)"),
    "i-saturated": Fault(Place.CHAIN, "current monitor at its converter's limit (-1: the lower one)"),
    "v-offset": Fault(Place.CHAIN, "voltage monitor off by so many codes", 300.0),
    "i-offset": Fault(Place.CHAIN, "current monitor off by so many codes", 300.0),
    "v-gain": Fault(Place.CHAIN, "voltage monitor's gain off by this share", -0.1),
    "v-drift": Fault(Place.CHAIN, "voltage monitor drifts by so many codes a second", 20.0),
    "v-reversed": Fault(Place.CHAIN, "voltage monitor with the wrong sign"),
    "i-reversed": Fault(Place.CHAIN, "current monitor with the wrong sign"),
    "swapped": Fault(Place.CHAIN, "the two monitors exchanged"),
    "divider-open": Fault(Place.CHAIN, "divider's upper arm open: reads zero volts"),
    "divider-low-open": Fault(Place.CHAIN, "divider's lower arm open: reads the clamp"),
    "shunt-open": Fault(Place.CHAIN, "shunt open: reads the clamp as soon as current flows"),
    "shunt-short": Fault(Place.CHAIN, "shunt shorted: reads zero amps"),
    "noise": Fault(Place.CHAIN, "noise so many times larger", 20.0),
    "v-spike": Fault(Place.CHAIN, "one voltage sample raised by so many codes", 8000.0, once=True),
    "i-spike": Fault(Place.CHAIN, "one current sample raised by so many codes", 30000.0, once=True),
    "v-dip": Fault(Place.CHAIN, "one voltage sample lowered by so many codes", 8000.0, once=True),
    "relay-welded": Fault(Place.CONTACT, "power relay does not open any more"),
    "relay-dead": Fault(Place.CONTACT, "power relay does not close"),
    "inhibit-dead": Fault(Place.CONTACT, "inhibit has no effect, its read-back shows it released"),
    "inhibit-lies": Fault(Place.CONTACT, "inhibit has no effect, its read-back shows the command all the same"),
    "clear-dead": Fault(Place.CONTACT, "clear has no effect"),
    "relay-back-stuck": Fault(Place.CONTACT, "relay's read-back stands at 1 (closed) or 0", 0.0),
    "inhibit-back-stuck": Fault(Place.CONTACT, "inhibit's read-back stands at 1 (asserted) or 0"),
    "danger-dark": Fault(Place.CONTACT, "danger signal stays dark"),
    "danger-lit": Fault(Place.CONTACT, "danger signal lit without power"),
    "contactor-welded": Fault(Place.CONTACT, "the interlock's own contactor does not drop"),
    "interlock-open": Fault(Place.CONTACT, "interlock loop open (hard-wired latch follows)"),
    "ground-on": Fault(Place.CONTACT, "grounding device on the output, its contact says so"),
    "ground-lies": Fault(Place.CONTACT, "grounding device on the output, its contact says open"),
    "ground-contact": Fault(Place.CONTACT, "grounding device open, its contact says otherwise"),
    "arm-stuck": Fault(Place.CONTACT, "arm input stands pressed"),
    "arm-bounce": Fault(Place.CONTACT, "arm input bounces for so long at each edge", 0.08, _S),
    "polarity-wrong": Fault(Place.CONTACT, "supply set to the other polarity, its contact says so"),
    "auxiliary-low": Fault(Place.CONTACT, "auxiliary supplies low: monitors read four fifths"),
    "mains-lost": Fault(Place.CONTACT, "supply's mains power gone (give +0.3s to have it back)"),
    "program-open": Fault(Place.SUPPLY, "voltage programming lead off: set-point zero"),
    "program-offset": Fault(Place.SUPPLY, "output offset by so many volts of set-point", 500.0, _V),
    "runaway": Fault(Place.SUPPLY, "set-point ignored, output climbs to this voltage", 1e6, _V),
    "limit-dead": Fault(Place.SUPPLY, "current set-point ignored: full current"),
    "panel-v": Fault(Place.SUPPLY, "front panel's voltage turned down to this", 5e3, _V),
    "panel-a": Fault(Place.SUPPLY, "front panel's current turned down to this", 50e-6, _A),
    "lead-off": Fault(Place.LOAD, "specimen's lead off"),
    "leak": Fault(Place.LOAD, "resistance across the specimen", 50e6, _R),
    "short": Fault(Place.LOAD, "specimen shorted, by so many ohms", 1e3, _R),
    "arc": Fault(Place.LOAD, "one arc", once=True),
    "arc-burst": Fault(Place.LOAD, "so many arcs, each as soon as the last is out", 20.0, once=True),
    "dip": Fault(Place.LOAD, "a short partial collapse, to this share of the voltage", 0.9, once=True),
    "byte-lost": Fault(Place.WIRE, "share of bytes lost, both directions", 1e-3),
    "byte-flipped": Fault(Place.WIRE, "share of bytes with one flipped bit", 1e-3),
    "byte-doubled": Fault(Place.WIRE, "share of bytes that come twice", 1e-3),
    "byte-swapped": Fault(Place.WIRE, "share of bytes that change places with the next", 1e-3),
    "line-noise": Fault(Place.WIRE, "share of bytes followed by a random byte", 1e-3),
    "line-doubled": Fault(Place.WIRE, "share of chunks that come twice", 0.01),
    "echo": Fault(Place.WIRE, "what the host sends comes back to it"),
    "mute": Fault(Place.WIRE, "nothing from the MCU reaches the host"),
    "deaf": Fault(Place.WIRE, "nothing from the host reaches the MCU"),
    "mcu-reset": Fault(Place.MCU, "reset by the watchdog", once=True),
    "mcu-brownout": Fault(Place.MCU, "reset by a brown-out", once=True),
    "mcu-stopped": Fault(Place.MCU, "MCU stands still, its outputs as the wiring leaves them"),
    "mcu-slow": Fault(Place.MCU, "answers and blocks so much later", 0.05, _S),
    "mcu-missed": Fault(Place.MCU, "share of conversions missed", 0.01),
    "clock-drift": Fault(Place.MCU, "MCU clock fast by so many ppm", 200.0),
}


@dataclass(frozen=True, slots=True, kw_only=True)
class FaultSpec:
    """One fault as asked for: value, from which time or true voltage on, for how long."""

    name: str
    value: float
    at_s: float = 0.0
    at_v: float = 0.0
    for_s: float = math.inf


_SPEC = re.compile(r"(?P<name>[a-z-]+)(?:=(?P<value>[^@+]+?))?(?:@(?P<when>[^+]+?))?(?:\+(?P<span>.+))?")


def _known(name: str) -> Fault:
    if name not in FAULTS:
        near = get_close_matches(name, FAULTS, 1)
        raise UsageFault("a fault of the list in 'hvhost standin --help'", repr(name), "fault",
                         f"nearest: {near[0]}" if near else "")
    return FAULTS[name]


def parse_fault(text: str) -> FaultSpec:
    """Read ``name[=value][@when][+duration]``; raise `UsageFault` naming the nearest right words."""
    match = _SPEC.fullmatch(text.strip())
    if match is None:
        raise UsageFault("a fault such as 'lead-off', 'v-offset=200@8kV' or 'mains-lost@12s+0.3s'", repr(text), "fault")
    name, value, when, span = match.group("name", "value", "when", "span")
    fault = _known(name)
    try:
        at_v = parse_quantity(when, Dimension.VOLT) if when and when.endswith("V") else 0.0
        return FaultSpec(name=name, value=parse_quantity(value, fault.dimension) if value else fault.default,
                         at_s=parse_quantity(when, Dimension.SECOND) if when and not at_v else 0.0, at_v=at_v,
                         for_s=parse_quantity(span, Dimension.SECOND) if span else math.inf)
    except QuantityFault as fault_of_quantity:
        raise UsageFault(fault_of_quantity.expected, fault_of_quantity.found, f"fault {name}",
                         fault_of_quantity.remedy) from None


def fault_lines() -> tuple[str, ...]:
    """Return one line per fault for a help page."""
    width = max(map(len, FAULTS))
    return tuple(f"  {name:<{width}}  {fault.doc}" + ("" if fault.default == 1.0 else f" [{fault.default:g}]")
                 for name, fault in FAULTS.items())


class FaultBook:
    """Which faults are on now and which will come; ``version`` counts changes so that owners look only then."""

    __slots__ = ("_ends", "_waiting", "active", "next_s", "next_v", "version")

    def __init__(self, specs: Iterable[FaultSpec | str] = ()) -> None:
        self.active: dict[str, float] = {}
        self.version = 0
        self._waiting: list[FaultSpec] = []
        self._ends: dict[str, float] = {}
        self.next_s = self.next_v = math.inf
        for spec in specs:
            self.plan(parse_fault(spec) if isinstance(spec, str) else spec)

    def plan(self, spec: FaultSpec) -> None:
        """Let a fault come when its time or voltage is reached."""
        if len(self._waiting) >= WAITING_MAX:
            raise UsageFault(f"at most {WAITING_MAX} faults to come", str(len(self._waiting) + 1), "fault")
        self._waiting.append(spec)
        self._look_ahead()

    def on(self, name: str, value: float | None = None) -> None:
        """Switch a fault on now."""
        fault = _known(name)
        self.active[name] = fault.default if value is None else value
        self.version += 1

    def off(self, name: str) -> None:
        """Switch a fault off; one that is not on stays off."""
        if self.active.pop(name, None) is not None:
            self.version += 1
        self._ends.pop(name, None)
        self._look_ahead()

    def take(self, name: str) -> float | None:
        """Return and clear a fault that happens once, None if it is not due."""
        value = self.active.pop(name, None)
        if value is not None:
            self.version += 1
        return value

    def step(self, t_s: float, v: float) -> None:
        """Switch on what is due at this time and true voltage, switch off what has lasted long enough."""
        due = [s for s in self._waiting if (v >= s.at_v if s.at_v else t_s >= s.at_s)]
        self._waiting = [s for s in self._waiting if s not in due]
        for name in [name for name, end_s in self._ends.items() if t_s >= end_s]:
            self.off(name)
        for spec in due:
            self.on(spec.name, spec.value)
            if spec.for_s < math.inf:
                self._ends[spec.name] = t_s + spec.for_s
        self._look_ahead()

    def _look_ahead(self) -> None:
        times = [s.at_s for s in self._waiting if not s.at_v] + list(self._ends.values())
        self.next_s = min(times, default=math.inf)
        self.next_v = min((s.at_v for s in self._waiting if s.at_v), default=math.inf)


class WireFaults:
    """Spoils bytes on their way, as the book says; with no wire fault on, bytes pass as the same object."""

    __slots__ = ("_book", "_echo", "_rng", "_seen", "_spoiling", "spoiled")

    def __init__(self, book: FaultBook, seed: int) -> None:
        self._book = book
        self._rng = Random(f"wire {seed}")
        self._seen = -1
        self._spoiling = False
        self._echo = bytearray()
        self.spoiled = 0

    @property
    def echoing(self) -> bool:
        """Whether bytes of the host are on their way back to it."""
        return bool(self._echo)

    def to_host(self, data: bytes) -> bytes:
        """Pass bytes from the MCU to the host."""
        if not self._look() and not self._echo:
            return data
        echoed = bytes(self._echo)
        self._echo.clear()
        return b"" if "mute" in self._book.active else self._spoil(data) + echoed

    def to_mcu(self, data: bytes) -> bytes:
        """Pass bytes from the host to the MCU."""
        if not self._look():
            return data
        if "echo" in self._book.active and len(self._echo) < 4096:
            self._echo += data
        return b"" if "deaf" in self._book.active else self._spoil(data)

    def _look(self) -> bool:
        if self._seen != self._book.version:
            self._seen = self._book.version
            self._spoiling = any(FAULTS[name].place is Place.WIRE for name in self._book.active)
        return self._spoiling

    def _spoil(self, data: bytes) -> bytes:
        active, draw = self._book.active, self._rng.random
        if data and draw() < active.get("line-doubled", 0.0):
            data += data
            self.spoiled += 1
        shares = [active.get(f"byte-{what}", 0.0) for what in ("lost", "flipped", "doubled", "swapped")]
        lost, flipped, doubled, swapped = shares
        noise = active.get("line-noise", 0.0)
        if not any(shares) and not noise:
            return data
        out = bytearray()
        for byte in data:
            if draw() < lost:
                self.spoiled += 1
                continue
            if draw() < flipped:
                byte ^= 1 << self._rng.randrange(8)
                self.spoiled += 1
            out.append(byte)
            if draw() < doubled:
                out.append(byte)
                self.spoiled += 1
            if draw() < swapped and len(out) > 1:
                out[-1], out[-2] = out[-2], out[-1]
                self.spoiled += 1
            if draw() < noise:
                out.append(self._rng.randrange(256))
                self.spoiled += 1
        return bytes(out)
