"""One session of the host's link and the stand-in's MCU in memory, as lines of text for PROTOCOL.md section 18."""

from collections.abc import Callable

from hvhost.standin.board import McuConfig
from hvhost.standin.eeprom import Eeprom
from hvhost.standin.mcu import Mcu
from hvhost.wire.frames import Arm, Reset, Segment
from hvhost.wire.link import BlockIn, Link
from hvhost.wire.settings import Settings
from tests.wire.scenario import ScriptBench
from tests.wire.scenarios import SETTINGS

LOOK_TICKS = 50
HZ = 10_000


class Session:
    """A link, an MCU, a scripted bench and the dialogue of what passes between them."""

    def __init__(self) -> None:
        config = McuConfig(firmware="standin", before=16, after=16)
        self.bench = ScriptBench(dict(SETTINGS), {"fall": 20}, config)
        self.mcu = Mcu(self.bench, Eeprom(Settings.of(SETTINGS)), config)
        self.link = Link(0.0, session=0xC0FFEE01, lease_ms=500)
        self.lines: list[str] = []
        self.passed = [0, 0]  # blocks and renewals not written out since the last line
        self.tick = 0

    def note(self, arrow: str, data: bytes) -> None:
        """Write down the lines, blocks and renewals only as numbers after the first of each."""
        for text in data.decode("ascii").splitlines():
            quiet = 0 if text.startswith("b ") else 1 if text.startswith("renew ") else None
            if quiet is not None:
                self.passed[quiet] += 1
                if any(line[10:].startswith(text.split(" ")[0] + " ") for line in self.lines):
                    continue
                self.passed[quiet] -= 1
                text = text if quiet else text[:58] + "..."
            if text:
                self.flush()
                self.lines.append(f"{self.tick:6d}  {arrow} {text}")

    def flush(self) -> None:
        """Write down how many blocks and renewals have passed."""
        blocks, renewals = self.passed
        if blocks or renewals:
            self.lines.append(f"          ({blocks} blocks, {renewals} renewals)")
        self.passed = [0, 0]

    def until(self, tick: int) -> None:
        """Let time pass; every block is judged good and renews the lease."""
        while True:
            now_s = self.tick / HZ
            data = self.mcu.take_output()
            self.note("<", data)
            for event in self.link.receive(data, now_s):
                if isinstance(event, BlockIn):
                    self.link.renew(event.block.index + event.block.pairs - 1, now_s)
            self.link.timer(now_s)
            out = self.link.take_output(now_s)
            if out:
                self.note(">", out)
                self.mcu.feed(out, self.tick)
                continue
            if self.tick >= tick:
                return
            self.tick = min(tick, self.tick + LOOK_TICKS)
            self.mcu.advance_to(self.tick)

    def say(self, text: str, act: Callable[[], object]) -> None:
        """Write down what happens at the bench or in the host, and do it."""
        self.flush()
        self.lines.append(f"{self.tick:6d}  - {text}")
        act()


def dialogue() -> list[str]:
    """Return the session's lines: tick, direction, line."""
    s = Session()
    link, contacts = s.link, s.bench.contacts
    s.until(1500)
    s.say("the host names the cause of the boot", lambda: link.request(Reset(causes=0x00100000, grounded=0)))
    s.until(2000)
    s.say("the host asks to arm", lambda: link.request(Arm(
        arm=1, tag=0xABCD, settings=Settings.of(SETTINGS).checksum, event=link.last_event, pause=(2, 500, 10_000))))
    s.until(2500)
    s.say("the arm input is pressed for 0.3 s", lambda: contacts.update(arm_input=True))
    s.until(5500)
    contacts.update(arm_input=False)
    s.until(9000)
    s.say("the host queues a ramp in the warning", lambda: link.request(Segment(v=20_000, i=30_000, ticks=4_000)))
    s.until(42_000)
    s.say("the specimen arcs for 3 ms", lambda: s.bench.codes.update(v=1_000))
    s.until(42_030)
    s.bench.codes.update(v=None)
    s.until(47_500)
    s.say("after the rest the host climbs again", lambda: link.request(Segment(v=5_000, i=30_000, ticks=2_000, arc=1)))
    s.until(51_000)
    s.say("an operator cuts", lambda: link.cut(0, s.tick / HZ))
    s.until(53_000)
    s.flush()
    s.lines.append(f"{s.tick:6d}  - the cut is {link.cut_state}")
    return s.lines
