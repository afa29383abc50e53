"""The whole stand-in: a run on the simulated plant, faults of wire and MCU, truth, determinism."""

import json

import pytest

from hvhost.standin.bench import StandIn, stand_in
from hvhost.standin.eeprom import Eeprom
from hvhost.standin.truth import TruthLog
from hvhost.wire.frames import Block, McuEvent, Ok, Refusal, Renew, decode_received, encode_request
from hvhost.wire.lines import Garbled, LineReader, seal
from hvhost.wire.vocabulary import Cause, McuState
from hvhost.words.errors import UsageFault

SESSION = 0x1234ABCD


class Host:
    """The least host that can run a bench: greets, renews, asks."""

    def __init__(self, bench: StandIn) -> None:
        self.bench = bench
        self.reader = LineReader()
        self.blocks: list[Block] = []
        self.events: list[McuEvent] = []
        self.answers: list[Ok | Refusal] = []
        self.garbled = 0
        self.n = 0
        self.bytes = b""
        self.say(f"hello 2147483648 {SESSION:08X} 1 500")

    def say(self, body: str) -> None:
        self.bench.feed(seal(body.encode()))
        self.collect()

    def ask(self, verb: str, fields: str) -> Ok | Refusal:
        self.n += 1
        self.say(f"{verb} {self.n} {SESSION:08X} {fields}")
        return self.answers[-1]

    def collect(self) -> None:
        data = self.bench.take_output()
        self.bytes += data
        for body in self.reader.feed(data):
            if isinstance(body, Garbled):
                self.garbled += 1
                continue
            frame = decode_received(body, self.bench.config.signs)
            if isinstance(frame, Block):
                self.blocks.append(frame)
                last = (frame.index + frame.pairs - 1) & 0xFFFFFFFF
                self.bench.feed(seal(encode_request(Renew(session=SESSION, index=last))))
            elif isinstance(frame, McuEvent):
                self.events.append(frame)
            else:
                self.answers.append(frame)

    def wait(self, seconds: float) -> None:
        end = self.bench.tick + round(seconds * StandIn.TICK_HZ)
        while self.bench.tick < end:
            self.bench.advance_to(min(end, self.bench.tick + 160))
            self.collect()

    def energise(self, pause: str = "") -> None:
        """Clear the boot's latch, arm, press, wait for the warning's end."""
        settings = self.bench.eeprom.settings
        assert settings is not None
        self.wait(settings["bleed"] * settings["bleeds"] / 1000 + 0.2)
        assert isinstance(self.ask("reset", f"{int(self.bench.mcu.latched):08X} 1"), Ok)
        event = self.bench.mcu.core.stream.number
        armed = self.ask("arm", f"1 0000BEEF {settings.checksum:08X} {event} {pause}".rstrip())
        assert isinstance(armed, Ok), armed
        self.bench.plant.press(0.5)
        self.wait(1.0 + settings["warn"] / 1000)
        assert self.bench.mcu.state is McuState.ENERGISED

    def climb(self, v: int, seconds: float) -> None:
        assert isinstance(self.ask("seg", f"{v} 60000 {round(seconds * StandIn.TICK_HZ)}"), Ok)
        self.wait(seconds)


@pytest.mark.parametrize("profile", ["demo", "small"])
def test_a_quiet_run_on_the_plant_trips_nothing(profile):
    """Arm, press, prove, warn, climb, hold, lower, cut on the real physics of both benches, with noise and ripple."""
    bench = stand_in(profile, 3)
    host = Host(bench)
    settings = bench.eeprom.settings
    assert settings is not None
    if profile == "small":
        host.energise()
        host.ask("seg", f"{settings['vmax'] // 2} {settings['imax']} 30000")
        host.wait(4.0)
    else:
        host.energise()
        host.climb(30_000, 3.0)
        host.wait(1.0)
    assert bench.mcu.state is McuState.ENERGISED
    assert bench.plant.v_true == pytest.approx(bench.mcu.v_word * bench.config.v_volts_per_code / 10.0
                                               * bench.plant.params.supply.v_full, rel=5e-3)
    host.say(f"lower 1 {SESSION:08X}")
    host.wait(4.0)
    assert bench.mcu.state is McuState.OFF
    assert not bench.mcu.latched
    assert not bench.plant.power


def test_the_specimens_own_breakdown_trips_within_a_few_samples():
    """From the strike in the plant to the dropped relay: the rule's samples and the chain's lag, no more."""
    lines: list[str] = []
    truth = TruthLog(lines.append, tick_hz=StandIn.TICK_HZ)
    bench = stand_in("demo", 3, changes=["specimen.strength_v=10 kV"], truth=truth)
    host = Host(bench)
    host.energise()
    host.climb(40_000, 4.0)
    assert bench.mcu.latched & (Cause.BREAKDOWN | Cause.OVERCURRENT)
    events = [json.loads(line) for line in lines if '"event"' in line]
    struck = next(e for e in events if e["what"] == "arc")
    cut = next(e for e in events if e["what"] == "cut")
    assert 0.0 < cut["t_s"] - struck["t_s"] < 0.010
    assert abs(struck["value"] - 10e3) < 1.5e3
    assert bench.eeprom.kept.tag == 0xBEEF


def test_in_pause_a_self_restoring_gap_is_climbed_again():
    """The relay stays closed, the rest is kept, the segment with the arc's number leads on."""
    bench = stand_in("gap", 5, changes=["specimen.strength_v=9 kV"])
    host = Host(bench)
    host.energise("pause=5,500,60000")
    host.climb(40_000, 4.0)
    assert bench.mcu.state is McuState.PAUSING
    assert bench.plant.power
    host.wait(0.5)
    assert isinstance(host.ask("seg", "10000 60000 10000 arc=1"), Ok)
    host.wait(1.5)
    assert bench.mcu.state is McuState.ENERGISED
    assert not bench.mcu.latched


def test_one_seed_gives_the_same_bytes():
    """Plant, wire faults and MCU all follow the seed."""
    def played(seed: int) -> bytes:
        host = Host(stand_in("demo", seed, faults=["byte-flipped=0.001", "mcu-missed=0.01"]))
        host.wait(2.0)
        return host.bytes

    assert played(7) == played(7)
    assert played(7) != played(8)


def test_wire_faults_are_dropped_lines_not_deeds():
    """Flipped and lost bytes garble lines, and the MCU counts what it dropped."""
    bench = stand_in("demo", 2, faults=["byte-flipped=0.002", "byte-lost=0.002"])
    host = Host(bench)
    host.wait(3.0)
    assert host.garbled > 0
    assert bench.mcu.session.garbled >= 0
    assert bench.mcu.state is McuState.OFF


@pytest.mark.parametrize(("fault", "causes"), [
    ("mcu-reset", Cause.RESTARTED | Cause.RESTARTED_ENERGISED), ("mcu-brownout", Cause.RESTARTED),
    ("mains-lost+0.3s", Cause.DANGER_DARK), ("i-spike", Cause(0)), ("v-dip", Cause(0)),
    ("short", Cause.BREAKDOWN), ("v-stuck", Cause.READBACK_MISSING), ("ground-on", Cause.GROUNDING),
    ("auxiliary-low", Cause.AUXILIARY), ("runaway=20 kV", Cause.ABOVE_ENVELOPE)])
def test_each_fault_ends_as_it_should(fault, causes):
    """A fault while energised latches its cause, and one interfering sample latches none."""
    bench = stand_in("demo", 4, changes=["specimen.strength_v=60 kV"])
    host = Host(bench)
    host.energise()
    host.climb(20_000, 2.0)
    name = fault.partition("+")[0].partition("=")[0]
    bench.plant.faults.on(name)
    host.wait(0.5)
    if "+" in fault:
        bench.plant.faults.off(name)
        host.wait(0.5)
    if causes:
        assert bench.mcu.latched & causes
        assert not bench.plant.power
        assert bench.mcu.v_word == 0
    else:
        assert bench.mcu.state is McuState.ENERGISED
        assert "interfered" in [event.kind for event in host.events]


def test_a_stopped_mcu_leaves_the_output_to_the_wiring_and_boots_after():
    """Silence, inhibited by the wiring; then a boot that says what happened (S4)."""
    bench = stand_in("demo", 4)
    host = Host(bench)
    host.energise()
    host.climb(20_000, 2.0)
    bench.plant.faults.on("mcu-stopped")
    host.wait(0.01)
    blocks = len(host.blocks)
    bench.advance_to(bench.tick + 20_000)
    host.collect()
    assert len(host.blocks) <= blocks + 1
    assert not bench.plant.power
    bench.plant.faults.off("mcu-stopped")
    bench.advance_to(bench.tick + 100)
    host.collect()
    assert bench.mcu.latched & Cause.RESTARTED_ENERGISED


def test_a_fast_clock_makes_more_ticks_than_time():
    """200 ppm: after ten true seconds the MCU counts twenty ticks more."""
    bench = stand_in("demo", 1, faults=["clock-drift=200"])
    bench.advance_to(100_000)
    assert bench.mcu.tick == pytest.approx(100_020, abs=2)
    assert bench.plant.t_s == pytest.approx(10.0, abs=1e-3)


def test_a_slow_mcu_answers_later():
    """What it says reaches the host so much later."""
    bench = stand_in("demo", 1, faults=["mcu-slow=50 ms"])
    bench.advance_to(20)
    bench.take_output()
    bench.feed(seal(b"cut 1 0"))
    assert b"ok 1 cut" not in bench.take_output()
    bench.advance_to(20 + 510)
    assert b"ok 1 cut" in bench.take_output()


def test_missed_conversions_are_counted_gaps():
    """One in a hundred fails: indices go on, blocks part, the count is told."""
    bench = stand_in("demo", 1, faults=["mcu-missed=0.05"])
    host = Host(bench)
    host.wait(3.0)
    last = host.blocks[-1]
    assert last.missed > 30
    taken = sum(block.pairs for block in host.blocks)
    assert taken + last.missed == pytest.approx(last.index + last.pairs, abs=3)


def test_the_eeprom_may_be_given_blank_or_kept():
    """A blank one stays blank; one that is handed over outlives the stand-in; an unknown profile is refused."""
    assert stand_in("demo", blank=True).eeprom.blank
    eeprom = Eeprom()
    assert stand_in("demo", eeprom=eeprom).eeprom is eeprom
    assert eeprom.blank
    with pytest.raises(UsageFault):
        stand_in("nosuch")


def test_cuts_after_a_boot_are_in_the_truth():
    """Event numbers begin anew at a boot; what is cut then is written all the same."""
    lines: list[str] = []
    bench = stand_in("demo", 4, truth=TruthLog(lines.append, tick_hz=StandIn.TICK_HZ))
    host = Host(bench)
    host.energise()
    bench.reset()
    host.n = 0
    host.say(f"hello 2147483649 {SESSION:08X} 1 500")
    host.energise()
    host.say("cut 5 0")
    host.wait(0.1)
    whats = [json.loads(line).get("what") for line in lines]
    assert whats.index("cut") > whats.index("mcu reset")


def test_the_truth_file_costs_no_different_bytes():
    """Watching changes nothing of what the MCU does."""
    def played(truth: TruthLog | None) -> bytes:
        host = Host(stand_in("demo", 6, truth=truth))
        host.energise()
        host.climb(10_000, 1.0)
        return host.bytes

    lines: list[str] = []
    assert played(None) == played(TruthLog(lines.append, tick_hz=StandIn.TICK_HZ))
    assert any('"relay":1' in line for line in lines)
