"""Two real ends and a bad wire: the host's link against the stand-in's MCU, bytes lost, flipped and torn by a seed."""

import random

import pytest

from hvhost.standin.board import McuConfig
from hvhost.standin.eeprom import Eeprom
from hvhost.standin.mcu import Mcu
from hvhost.wire.frames import Arm, Reset, Segment
from hvhost.wire.link import (
    Answered,
    BlockIn,
    CutState,
    Dropped,
    Ended,
    EventIn,
    Fault,
    Link,
    LinkEvent,
    LinkState,
)
from hvhost.wire.settings import Settings
from hvhost.wire.vocabulary import McuState, ResetCause
from hvhost.words.errors import CommandRefused
from tests.wire.device import say
from tests.wire.scenario import ScriptBench
from tests.wire.scenarios import SETTINGS

LOOK = 100  # ticks, 10 ms
HZ = 10_000


class Wire:
    """Carries bytes both ways and spoils some of them."""

    def __init__(self, seed: int, bad: float) -> None:
        self.random, self.bad = random.Random(seed), bad
        self.config = McuConfig(before=16, after=16)
        self.bench = ScriptBench(dict(SETTINGS), {"fall": 20}, self.config)
        self.mcu = Mcu(self.bench, Eeprom(Settings.of(SETTINGS)), self.config)
        self.link = Link(0.0, session=0x1234ABCD, lease_ms=500)
        self.tick = 0
        self.events: list[LinkEvent] = []

    def spoil(self, data: bytes) -> bytes:
        """Lose, flip or double single bytes."""
        out = bytearray()
        for byte in data:
            luck = self.random.random()
            if luck < self.bad:
                continue
            out.append(byte ^ 1 << self.random.randrange(8) if luck < 2 * self.bad else byte)
            if luck > 1 - self.bad:
                out.append(byte)
        return bytes(out)

    def until(self, tick: int) -> None:
        """Let time pass, every block judged good."""
        while self.tick < tick:
            self.tick += LOOK
            now_s = self.tick / HZ
            self.mcu.advance_to(self.tick)
            got = self.link.receive(self.spoil(self.mcu.take_output()), now_s)
            for event in got:
                if isinstance(event, BlockIn):
                    self.link.renew(event.block.index + event.block.pairs - 1, now_s)
            self.events += got + self.link.timer(now_s)
            self.mcu.feed(self.spoil(self.link.take_output(now_s)), self.tick)


def climbed(seed: int, bad: float) -> Wire:
    """Return a wire over which a run was armed and, with luck, energised."""
    wire = Wire(seed, bad)
    wire.until(15_000)
    link = wire.link
    for _ in range(6):
        if link.state is LinkState.GREETED and wire.mcu.latched:
            link.request(Reset(causes=int(wire.mcu.latched), grounded=0))
            wire.until(wire.tick + 3_000)
    for number in range(1, 7):
        if link.state is LinkState.GREETED and wire.mcu.state is McuState.OFF:
            link.request(Arm(arm=number, tag=1, settings=Settings.of(SETTINGS).checksum,
                             event=wire.mcu.core.stream.number))
            wire.until(wire.tick + 2_000)
    wire.bench.contacts["arm_input"] = True
    wire.until(wire.tick + 3_000)
    wire.bench.contacts["arm_input"] = False
    wire.until(wire.tick + 4_000)
    if link.state is LinkState.GREETED:
        for word in (5_000, 20_000):
            link.request(Segment(v=word, i=30_000, ticks=4_000))
    wire.until(wire.tick + 40_000)
    return wire


def test_a_good_wire_energises() -> None:
    """Without faults the run climbs, and nothing at all is a fault."""
    wire = climbed(1, 0.0)
    assert wire.mcu.state is McuState.ENERGISED
    assert wire.mcu.v_word == 20_000
    assert not [e for e in wire.events if isinstance(e, Fault | Ended | Dropped)]


@pytest.mark.parametrize("seed", range(6))
def test_no_request_is_obeyed_twice_over_a_bad_wire(seed: int) -> None:
    """One byte in 700 spoiled each way: each answered segment ran once, and what the device says is never a fault."""
    wire = climbed(seed, 0.0005)
    started = [e.event.a for e in wire.events if isinstance(e, EventIn) and e.event.kind == "segment"]
    assert started == sorted(set(started))
    assert wire.mcu.v_word <= 20_000
    assert not [e for e in wire.events if isinstance(e, Fault)]
    tickets = [e.ticket for e in wire.events if isinstance(e, Answered | Dropped)]
    assert len(tickets) == len(set(tickets))


@pytest.mark.parametrize("seed", range(6))
def test_a_cut_gets_through_a_bad_wire_and_is_confirmed(seed: int) -> None:
    """One byte in 70 spoiled: the MCU cuts within 0.3 s of the decision, and is confirmed when the wire calms down."""
    wire = climbed(100 + seed, 0.0)
    assert wire.mcu.state is McuState.ENERGISED
    wire.bad = 0.005
    wire.link.cut(0, wire.tick / HZ)
    decided = wire.tick
    while wire.mcu.state is not McuState.OFF and wire.tick < decided + 50_000:
        wire.until(wire.tick + LOOK)
    assert wire.tick - decided <= 3_000
    wire.bad = 0.0
    wire.until(wire.tick + 5_000)
    assert wire.link.cut_state is CutState.CONFIRMED
    assert not wire.bench.relay


def test_a_deaf_host_ends_in_zero_and_a_cut() -> None:
    """When nothing reaches the MCU any more it lowers within the lease and cuts, and the link says silent."""
    wire = climbed(7, 0.0)
    wire.bad = 1.0
    wire.until(wire.tick + 5_100)
    assert wire.mcu.state is McuState.LOWERING
    wire.until(wire.tick + 5_000)
    assert wire.mcu.state is McuState.OFF
    assert [e for e in wire.events if type(e).__name__ == "Silent"]


def test_a_restart_in_mid_run_ends_the_link_and_nothing_resumes() -> None:
    """After a reset of the MCU the link ends, no request is taken, and the output stays off."""
    wire = climbed(8, 0.0)
    wire.link.request(Segment(v=21_000, i=30_000, ticks=4_000))
    wire.mcu.reset(ResetCause.WATCHDOG)
    wire.until(wire.tick + 3_000)
    assert wire.link.state is LinkState.ENDED
    with pytest.raises(CommandRefused):
        wire.link.request(Segment(v=1, i=1, ticks=1000))
    wire.until(wire.tick + 20_000)
    assert wire.mcu.state is McuState.OFF
    assert wire.mcu.v_word == 0


@pytest.mark.parametrize("seed", range(4))
def test_pure_noise_moves_nothing(seed: int) -> None:
    """A megabyte of noise in both directions: no event but dropped lines, and the MCU stays off."""
    noise = random.Random(seed)
    wire = Wire(seed, 0.0)
    for _ in range(50):
        wire.mcu.feed(noise.randbytes(5_000), wire.tick)
        assert wire.mcu.state is McuState.OFF
        for event in wire.link.receive(noise.randbytes(5_000), 0.0):
            assert type(event).__name__ == "GarbledIn"


def _anything(luck: random.Random, mcu: Mcu, n: int) -> str:
    """Return a well-formed request with plausible fields: current numbers more often than not."""
    core = mcu.core
    checksum = Settings.of(SETTINGS).checksum
    near = luck.choice
    return near((
        f"arm {n} 1234ABCD {core.arms + near((1, 1, 0, 2))} 00000001 {checksum:08X} "
        f"{core.stream.number - near((0, 0, 1))}" + near(("", " pause=2,500,10000", " oc=1")),
        f"seg {n} 1234ABCD {luck.randrange(65536)} {luck.randrange(65536)} {luck.randrange(20_000)}"
        + near(("", " arc=1")),
        f"reset {n} 1234ABCD {int(mcu.latched):08X} {near((0, 1))}", f"again {n} 1234ABCD {core.stream.number}",
        f"put {n} 1234ABCD fitted {luck.randrange(1 << 15)}", f"put {n} 1234ABCD warn 3000",
        f"save {n} 1234ABCD {checksum:08X}", f"snap {n} 1234ABCD 0", f"info {n} 1234ABCD {near((0, 3))}",
        f"renew 1234ABCD {core.index - near((0, 1, 600))}", f"lower {n} 1234ABCD", f"arc {n} 1234ABCD {core.index}",
        f"cut {n} {near((0, 0, 4))}", "hello 3221225472 1234ABCD 1 500"))


@pytest.mark.parametrize("seed", range(8))
def test_without_a_press_no_host_can_energise(seed: int) -> None:
    """Whatever well-formed lines a host sends, without a press the inhibit stays asserted and the relay open."""
    luck = random.Random(seed)
    bench = ScriptBench(dict(SETTINGS), {"fall": 20}, McuConfig())
    mcu = Mcu(bench, Eeprom(Settings.of(SETTINGS)), McuConfig())
    seen, tick, n = set(), 2_000, 1
    mcu.feed(say("hello 3221225472 1234ABCD 1 500"), tick)
    for _ in range(1_500):
        body = _anything(luck, mcu, n)
        mcu.feed(say(body), tick)
        answer = mcu.take_output()
        if body.startswith("hello"):
            n = 1
        elif b" %d " % n in answer and not body.startswith(("renew", "cut", "lower", "arc")):
            n += 1
        seen.add(mcu.state)
        assert bench.inhibit
        assert bench.clear
        assert not bench.relay
        assert mcu.v_word == mcu.i_word == 0
        tick += luck.choice((1, 10, 100, 1_000))
        mcu.advance_to(tick)
    assert seen == {McuState.OFF, McuState.REQUESTED}
