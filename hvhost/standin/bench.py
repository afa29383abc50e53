"""A whole stand-in: plant, MCU, wire, faults and truth on one clock; deterministic from its seed and its calls.

``advance_to(tick)``, ``feed(data)``, ``take_output()`` are what a host or a server needs; ``plant`` takes acts at the
bench, ``plant.faults`` faults.  The MCU works on the plant itself; only while a truth file is written, or a fault
needs it, does a `Watched` board stand between them.
"""

from collections import deque
from collections.abc import Iterable
from random import Random

from hvhost.standin.board import Board, McuConfig
from hvhost.standin.eeprom import Eeprom
from hvhost.standin.factory import factory_settings
from hvhost.standin.faults import FaultBook, FaultSpec, WireFaults
from hvhost.standin.mcu import Mcu
from hvhost.standin.params import PROFILES, PlantParams, changed
from hvhost.standin.plant import Plant
from hvhost.standin.truth import TruthLog
from hvhost.wire.vocabulary import EventKind, ResetCause
from hvhost.words.errors import UsageFault

NEVER = float("inf")
TICK_HZ = 10_000  # of every profile
PIECE_TICKS = 20  # a fault that is to come, or just came, is looked at this often
RESETS = (("mcu-reset", ResetCause.WATCHDOG), ("mcu-brownout", ResetCause.BROWN_OUT))


def config_of(params: PlantParams, *, first_tick: int = 0, first_index: int = 0) -> McuConfig:
    """The firmware configuration that fits a plant's converters: 10 k ticks/s, 1 k pairs/s, blocks of 32."""
    v_adc, i_adc = params.chain.v_adc, params.chain.i_adc
    return McuConfig(
        tick_hz=TICK_HZ, firmware=f"standin-{params.name}",
        signs=("s" if v_adc.signed else "u") + ("s" if i_adc.signed else "u"),
        v_bits=v_adc.bits, i_bits=i_adc.bits, v_dac_bits=params.v_dac.bits, i_dac_bits=params.i_dac.bits,
        v_volts_per_code=params.v_dac.volts_per_code, i_volts_per_code=params.i_dac.volts_per_code,
        first_tick=first_tick, first_index=first_index)


class StandIn:
    """See the module's text.  ``eeprom`` outlives the stand-in where it is given; else it is one fresh from the bench.

    ``truth`` is started by its owner.  ``config`` overrides the firmware's configuration.
    """

    TICK_HZ = TICK_HZ

    def __init__(self, params: PlantParams, seed: int, *, eeprom: Eeprom | None = None,
                 config: McuConfig | None = None, faults: Iterable[FaultSpec | str] = (),
                 truth: TruthLog | None = None) -> None:
        self.seed = seed
        self.config = config or config_of(params)
        self.eeprom = eeprom if eeprom is not None else Eeprom()
        self.plant = Plant(params, seed, FaultBook(faults))
        self.truth = truth
        self._wire = WireFaults(self.plant.faults, seed)
        self._rng = Random(f"mcu {seed}")
        self._late: deque[tuple[int, bytes]] = deque()
        self._seen = -1
        self._stopped = False
        self._outer = 0
        self._inner = 0.0  # MCU ticks passed, ahead of the outer ones where its clock is fast
        self.mcu = Mcu(self.plant, self.eeprom, self.config)
        self._watched = Watched(self)
        if truth is not None:
            self.mcu.core.board = self._watched

    @property
    def tick(self) -> int:
        """The MCU's tick."""
        return self.mcu.tick

    # ---------------------------------------------------------------- time and bytes

    def advance_to(self, tick: int) -> None:
        """Let time pass up to this tick of true time (the MCU's own clock may be off)."""
        faults = self.plant.faults
        if self._undisturbed and tick > self._outer:  # nearly always: the loop below for one whole piece at rate 1
            self._inner += tick - self._outer
            self._outer = tick
            self.mcu.advance_to(round(self._inner))
        while self._outer < tick:
            busy = faults.next_s < float("inf") or faults.next_v < float("inf") or faults.version != self._seen
            piece = min(PIECE_TICKS, tick - self._outer) if busy else tick - self._outer
            if faults.version != self._seen:
                self._settle()
            self._outer += piece
            self._inner += piece * self._rate()
            self.mcu.advance_to(round(self._inner))
        if faults.version != self._seen:
            self._settle()

    def feed(self, data: bytes, tick: int | None = None) -> None:
        """Take bytes from the host, now or at a later tick."""
        if tick is not None:
            self.advance_to(tick)
        self.mcu.feed(self._wire.to_mcu(data), self.mcu.tick)

    def take_output(self) -> bytes:
        """Return the bytes that have reached the host since the last call."""
        data = self.mcu.take_output()
        if not (data or self._late or self._wire.echoing):
            return data
        slow_s = self.plant.faults.active.get("mcu-slow", 0.0)
        if slow_s or self._late:
            if data:
                self._late.append((self._outer + round(slow_s * self.config.tick_hz), data))
            data = b""
            while self._late and self._late[0][0] <= self._outer:
                data += self._late.popleft()[1]
        return self._wire.to_host(data)

    # ---------------------------------------------------------------- faults of the MCU

    @property
    def _undisturbed(self) -> bool:
        """True while no fault is on, to come, or not yet acted out."""
        faults = self.plant.faults
        return (not faults.active and faults.version == self._seen and faults.next_s == NEVER
                and faults.next_v == NEVER)

    def _rate(self) -> float:
        return 1.0 + 1e-6 * self.plant.faults.active.get("clock-drift", 0.0)

    def _settle(self) -> None:
        """Act out the MCU's faults that were switched on or off."""
        book = self.plant.faults
        for name, cause in RESETS:
            if book.take(name) is not None:
                self.reset(cause)
        stopped = "mcu-stopped" in book.active
        if stopped and not self._stopped:
            self.mcu.hold_reset()
        elif self._stopped and not stopped:
            self.reset(ResetCause.EXTERNAL)
        self._stopped = stopped
        watched = self.truth is not None or "mcu-missed" in book.active or "clock-drift" in book.active
        self._watched.stretch = 1.0 / self._rate()
        self._watched.missed = book.active.get("mcu-missed", 0.0)
        board: Board = self._watched if watched else self.plant
        self.mcu.core.board = board
        self._seen = book.version

    def reset(self, cause: ResetCause = ResetCause.EXTERNAL) -> None:
        """Reset the MCU now."""
        self.mcu.reset(cause)
        if self.truth is not None:
            self.truth.event(self.mcu.tick, self.plant.t_s, "mcu reset", float(cause))

    def misses(self, share: float) -> bool:
        """Whether the next conversion fails."""
        return self._rng.random() < share


class Watched:
    """The plant as the MCU sees it, with every sample and every change of outputs written to the truth file."""

    def __init__(self, bench: StandIn) -> None:
        self._bench = bench
        self._plant = bench.plant
        self._event = 0
        self.stretch = 1.0
        self.missed = 0.0

    def advance(self, dt_s: float, v_cmd: float, i_cmd: float) -> None:
        """Let time pass; the MCU's clock may be fast, and its next conversion may fail."""
        self._plant.advance(dt_s * self.stretch, v_cmd, i_cmd)
        if self.missed and self._bench.misses(self.missed):
            self._bench.mcu.miss = 1

    def drive(self, *, inhibit: bool, clear: bool, relay: bool) -> None:
        """Pass the outputs on."""
        self._plant.drive(inhibit=inhibit, clear=clear, relay=relay)
        self._write()

    def inputs(self) -> int:
        """Pass the inputs on."""
        return self._plant.inputs()

    def sample(self) -> tuple[int, int]:
        """Convert, and write what was true at that moment."""
        codes = self._plant.sample()
        self._write()
        return codes

    def _write(self) -> None:
        bench, plant = self._bench, self._plant
        truth, core = bench.truth, bench.mcu.core
        if truth is None:
            return
        for event in plant.events:
            since = round((plant.t_s - event.t_s) / self.stretch * bench.config.tick_hz)  # it fell between samples
            truth.event(core.now - since, event.t_s, event.kind, event.value, event.detail)
        plant.events.clear()
        if core.stream.number < self._event:
            self._event = 0  # the MCU has booted: its events count from one again
        if core.stream.number != self._event:
            for told in core.stream.kept:
                if told.kind == EventKind.CUT and told.number > self._event:
                    since = (core.wire_tick(core.now) - told.tick) & 0xFFFFFFFF
                    at_s = plant.t_s - since * self.stretch / bench.config.tick_hz
                    truth.event(core.now - since, at_s, "cut", float(told.a))
            self._event = core.stream.number
        contacts = plant.contacts
        truth.state(core.now, plant.t_s, (core.inhibit, core.clear, core.relay, contacts.power, core.danger,
                                          int(core.state), core.eeprom.kept.causes),
                    plant.v_true, plant.i_true, core.v_word, core.i_word)


def stand_in(profile: str = "demo", seed: int = 1, *, changes: Iterable[str] = (), blank: bool = False,
             eeprom: Eeprom | None = None, faults: Iterable[FaultSpec | str] = (),
             truth: TruthLog | None = None) -> StandIn:
    """A stand-in of one of the profiles, commissioned unless ``blank``; raises `UsageFault` for an unknown profile."""
    if profile not in PROFILES:
        raise UsageFault(f"one of {', '.join(PROFILES)}", repr(profile), "profile")
    params = changed(PROFILES[profile](), changes)
    if eeprom is None:
        eeprom = Eeprom(None if blank else factory_settings(profile))
    return StandIn(params, seed, eeprom=eeprom, faults=faults, truth=truth)
