"""A scripted board and a host that speaks to the MCU on it: small, quiet, in codes."""

from collections.abc import Iterable

from hvhost.standin.board import McuConfig
from hvhost.standin.eeprom import Eeprom
from hvhost.standin.mcu import Mcu
from hvhost.wire.frames import (
    ArcSeen,
    Arm,
    Block,
    Cut,
    Hello,
    Lower,
    McuEvent,
    Ok,
    Refusal,
    Renew,
    Segment,
    decode_received,
    encode_request,
)
from hvhost.wire.lines import Garbled, LineReader, seal
from hvhost.wire.settings import Settings
from hvhost.wire.vocabulary import Fitted, Inputs, McuState

ALL = (Fitted.INHIBIT | Fitted.CLEAR | Fitted.RELAY | Fitted.INHIBIT_BACK | Fitted.RELAY_BACK | Fitted.DANGER
       | Fitted.EMERGENCY | Fitted.GROUND_SWITCH | Fitted.ARM_INPUT | Fitted.AUXILIARY | Fitted.POLARITY
       | Fitted.MONITOR_POWERED | Fitted.MONITOR_AT_SPECIMEN | Fitted.DANGER_FROM_RELAY)
SETTINGS = Settings.of({
    "vmax": 60000, "imax": 60000, "vslew": 60000, "islew": 600000, "vfull": 25000, "ifull": 4000, "polarity": 1,
    "vmap": 32768, "vzero": 0, "imap": 32768, "izero": 0, "downslew": 20000, "lowermax": 10000, "warn": 3000,
    "bleed": 500, "bleeds": 5, "zeroband": 60, "longest": 600, "leasemin": 100, "leasemax": 2000, "oc": 20000,
    "ocl": 15000, "oclms": 100, "ov": 31000, "env": 1000, "drop": 1000, "span": 4, "delay": 3, "persist": 2,
    "missms": 500, "arccount": 3, "arcrest": 200, "arcwindow": 10000, "arctotal": 20, "restrike": 20, "fitted": ALL})
SESSION = 0xC0FFEE01
READY = Inputs.INTERLOCK | Inputs.EMERGENCY | Inputs.GROUND_OPEN | Inputs.AUXILIARY | Inputs.POLARITY


class FakeBoard:
    """The voltage is half the word while driven, else it decays; read-backs follow unless ``forced`` says otherwise.

    ``v`` and ``i`` override the codes; ``outputs`` lists every (v_word volts, inhibit, relay) that time passed with.
    """

    def __init__(self) -> None:
        self.level = 0.0
        self.v: int | None = None
        self.i: int | None = None
        self.contacts = int(READY)
        self.forced: dict[Inputs, bool] = {}
        self.power = True
        self.tau_s = 0.4
        self.outputs: list[tuple[float, bool, bool]] = []
        self.inhibit, self.clear, self.relay = True, True, False
        self.flicker = 0

    def drive(self, *, inhibit: bool, clear: bool, relay: bool) -> None:
        self.inhibit, self.clear, self.relay = inhibit, clear, relay

    def advance(self, dt_s: float, v_cmd: float, i_cmd: float) -> None:
        word = v_cmd / 10.0 * 65535
        self.outputs.append((v_cmd, self.inhibit, self.relay))
        target = word / 2 if self.live and not self.clear else 0.0
        if target >= self.level:
            self.level = target
        else:
            self.level = max(target, self.level - self.level * dt_s / self.tau_s)

    @property
    def live(self) -> bool:
        return self.relay and self.power and not self.inhibit

    def sample(self) -> tuple[int, int]:
        self.flicker ^= 1
        return (round(self.level) + self.flicker if self.v is None else self.v), (0 if self.i is None else self.i)

    def inputs(self) -> int:
        bits = self.contacts
        follows = {Inputs.INHIBIT_BACK: self.inhibit, Inputs.RELAY_BACK: self.relay,
                   Inputs.DANGER: self.relay and self.power}
        for bit, level in {**follows, **self.forced}.items():
            bits = bits | bit if level else bits & ~bit
        return bits

    def open(self, contact: Inputs) -> None:
        self.contacts &= ~contact

    def close(self, contact: Inputs) -> None:
        self.contacts |= contact


class Bench:
    """An MCU on a fake board with a host that renews after each block while ``renewing``."""

    def __init__(self, settings: Settings | None = SETTINGS, eeprom: Eeprom | None = None, *, clear: bool = True,
                 hello: bool = True, lease_ms: int = 500, **config: object) -> None:
        self.board = FakeBoard()
        self.eeprom = eeprom or Eeprom(settings)
        self.mcu = Mcu(self.board, self.eeprom, McuConfig(**{"queue": 4, **config}))  # type: ignore[arg-type]
        self.signs = self.mcu.config.signs
        self.reader = LineReader()
        self.session = SESSION
        self.events: list[McuEvent] = []
        self.answers: list[Ok | Refusal] = []
        self.blocks: list[Block] = []
        self.renewing = True
        self.n = 0
        self.stop = 0
        if hello:
            self.hello(lease_ms=lease_ms)
            if clear:
                self.pass_ms(300)
                assert self.ask("reset", f"{self.causes:08X} 0").__class__ is Ok

    # ---------------------------------------------------------------- time and bytes

    @property
    def tick(self) -> int:
        return self.mcu.tick

    @property
    def state(self) -> McuState:
        return self.mcu.state

    @property
    def causes(self) -> int:
        return int(self.mcu.latched)

    def pass_ms(self, ms: float) -> None:
        """Let time pass by the millisecond, renewing as blocks come."""
        end = self.mcu.tick + round(ms * 10)
        while self.mcu.tick < end:
            self.mcu.advance_to(min(end, self.mcu.tick + 10))
            self.collect()

    def until(self, state: McuState, ms: float = 10_000) -> None:
        """Let time pass until the MCU is in this state."""
        for _ in range(round(ms)):
            if self.mcu.state is state:
                return
            self.pass_ms(1)
        raise AssertionError(f"{self.mcu.state!r} after {ms} ms, wanted {state!r}")

    def collect(self) -> None:
        for body in self.reader.feed(self.mcu.take_output()):
            assert not isinstance(body, Garbled)
            frame = decode_received(body, self.signs)
            if isinstance(frame, Block):
                self.blocks.append(frame)
                if self.renewing:
                    self.renew(frame.index + frame.pairs - 1)
            elif isinstance(frame, McuEvent):
                self.events.append(frame)
            else:
                self.answers.append(frame)

    def line(self, body: bytes | str) -> None:
        data = body.encode() if isinstance(body, str) else body
        self.mcu.feed(seal(data), self.mcu.tick)
        self.collect()

    def renew(self, index: int) -> None:
        self.mcu.feed(seal(encode_request(Renew(session=self.session, index=index & 0xFFFFFFFF))), self.mcu.tick)

    # ---------------------------------------------------------------- requests

    def last(self) -> Ok | Refusal:
        return self.answers[-1]

    def ask(self, verb: str, fields: str = "", n: int | None = None) -> Ok | Refusal:
        """Send the next numbered request and return its answer."""
        before = len(self.answers)
        if n is None:
            self.n = n = self.n + 1
        self.line(f"{verb} {n} {self.session:08X} {fields}".rstrip())
        assert len(self.answers) == before + 1
        return self.last()

    def code(self, verb: str, fields: str = "", n: int | None = None) -> str:
        """The error code of a refused request, '' where it was accepted."""
        answer = self.ask(verb, fields, n)
        return answer.code if isinstance(answer, Refusal) else ""

    def hello(self, session: int = SESSION, lease_ms: int = 500, n: int = 0x80000001) -> Ok | Refusal:
        self.session, self.n = session, 0
        self.line(encode_request(Hello(n=n, session=session, version=1, lease_ms=lease_ms)))
        return self.last()

    def arm_line(self, pause: tuple[int, int, int] | None = None, n: int | None = None, **changes: int) -> bytes:
        tighter = {k: v for k, v in changes.items() if k not in ("arm", "tag", "settings", "event")}
        settings = self.eeprom.settings
        fields = {"arm": self.mcu.core.arms + 1, "tag": 0xABCD1234,
                  "settings": settings.checksum if settings else 0, "event": self.mcu.core.stream.number,
                  **{k: v for k, v in changes.items() if k in ("arm", "tag", "settings", "event")}}
        return encode_request(Arm(n=self.n + 1 if n is None else n, session=self.session, pause=pause,
                                  tighter=tighter, **fields))

    def arm(self, pause: tuple[int, int, int] | None = None, **changes: int) -> str:
        """Send an arm; '' where accepted, else the error code."""
        line = self.arm_line(pause, **changes)
        self.n += 1
        self.line(line)
        answer = next(a for a in reversed(self.answers) if a.verb == "arm")
        return answer.code if isinstance(answer, Refusal) else ""

    def seg(self, v: int, i: int = 30000, ticks: int = 10_000, arc: int | None = None) -> str:
        self.n += 1
        self.line(encode_request(Segment(n=self.n, session=self.session, v=v, i=i, ticks=ticks, arc=arc)))
        answer = next(a for a in reversed(self.answers) if a.verb == "seg")
        return answer.code if isinstance(answer, Refusal) else ""

    def cut(self, rule: int = 0) -> None:
        self.stop += 1
        self.mcu.feed(b"\n", self.mcu.tick)
        self.line(encode_request(Cut(n=self.stop, rule=rule)))

    def lower(self) -> None:
        self.stop += 1
        self.line(encode_request(Lower(n=self.stop, session=self.session)))

    def arc(self, index: int, stop: int | None = None) -> Ok | Refusal:
        if stop is None:
            self.stop = stop = self.stop + 1
        self.line(encode_request(ArcSeen(n=stop, session=self.session, index=index & 0xFFFFFFFF)))
        return next(a for a in reversed(self.answers) if a.verb == "arc")

    # ---------------------------------------------------------------- the whole way

    def press(self, ms: float = 500) -> None:
        self.board.close(Inputs.ARM_INPUT)
        self.pass_ms(ms)
        self.board.open(Inputs.ARM_INPUT)
        self.pass_ms(2)

    def warned(self, pause: tuple[int, int, int] | None = None, **changes: int) -> "Bench":
        """Arm and press: the warning has begun."""
        assert self.arm(pause, **changes) == ""
        self.press()
        self.until(McuState.WARNING, 2_000)
        return self

    def energised(self, v: int = 20000, pause: tuple[int, int, int] | None = None, **changes: int) -> "Bench":
        """Arm, press, wait, climb to ``v`` in a second and stay there."""
        self.warned(pause, **changes)
        self.until(McuState.ENERGISED, 4_000)
        if v:
            assert self.seg(v) == ""
            self.pass_ms(1_100)
            assert self.mcu.v_word == v
        return self

    # ---------------------------------------------------------------- looking

    def kinds(self, since: int = 0) -> list[str]:
        return [event.kind for event in self.events if event.number > since]

    def event(self, kind: str) -> McuEvent:
        """The last event of this kind."""
        return next(event for event in reversed(self.events) if event.kind == kind)

    @property
    def dead(self) -> bool:
        """Inhibit and clear asserted, words zero, relay open."""
        board = self.board
        return board.inhibit and board.clear and not board.relay and self.mcu.v_word == self.mcu.i_word == 0


def words(values: Iterable[object]) -> str:
    return " ".join(map(str, values))
