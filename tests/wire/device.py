"""A small fake MCU that answers a greeting by the book, for tests of the host's end alone."""

from dataclasses import dataclass, field

from hvhost.wire.frames import Block, Get, Hello, Info, Request, decode_request, encode_block
from hvhost.wire.lines import LineReader, seal
from hvhost.wire.link import Greeted, Link, LinkEvent
from hvhost.wire.settings import PAGE, SETTINGS, Settings
from hvhost.wire.vocabulary import Fitted, Inputs

BACKS = Fitted.INHIBIT | Fitted.RELAY | Fitted.INHIBIT_BACK | Fitted.RELAY_BACK | Fitted.DANGER | \
    Fitted.DANGER_FROM_RELAY
SETTLED = Settings(tuple(
    {"polarity": 1, "warn": 3000, "leasemin": 100, "leasemax": 2000, "fitted": int(BACKS)}.get(s.key, max(s.low, 1))
    for s in SETTINGS))
CUT_POSITION = int(Inputs.INTERLOCK | Inputs.INHIBIT_BACK)


def block(index: int, *, tick: int | None = None, state: int = 0, inputs: int = CUT_POSITION, v: int = 0,
          pairs: int = 4, event: int = 3) -> Block:
    """Return a quiet block."""
    return Block(index, 10 * index if tick is None else tick, v, 0, state, 0, inputs, 0, event, 0, (7, -3) * pairs)


@dataclass
class Device:
    """Answers hello, info and get; everything else is left to the test."""

    settings: Settings | None = SETTLED
    fields: dict[str, str] = field(default_factory=dict)
    heard: list[Request] = field(default_factory=list)

    def page(self, page: int) -> str:
        """Return the options of one information page, with this test's changes."""
        checksum = self.settings.checksum if self.settings else 0
        pages = ({"fw": "fake-1", "proto": "1"},
                 {"signs": "ss", "vbits": "16", "ibits": "16", "dvbits": "16", "dibits": "16"},
                 {"tick": "10000", "sample": "10", "skew": "0", "block": "32", "queue": "16", "before": "64",
                  "after": "64"},
                 {"boot": "4", "reset": "1", "causes": "00100000", "rule": "0", "tag": "00000000", "mark": "0",
                  "settings": f"{checksum:08X}", "blank": "0" if self.settings else "1", "arm": "0", "event": "3",
                  "now": "77", "snap": "0", "first": "00100000", "at": "0", "v": "0", "i": "0"})
        return " ".join(f"{key}={self.fields.get(key, value)}" for key, value in pages[page].items())

    def hear(self, data: bytes) -> list[Request]:
        """Decode what the host sent and remember it."""
        frames = [decode_request(body) for body in LineReader().feed(data) if isinstance(body, bytes)]
        self.heard += frames
        return frames

    def answer(self, data: bytes) -> bytes:
        """Return the answers to the greeting's requests among these bytes."""
        out = b""
        for frame in self.hear(data):
            if isinstance(frame, Hello):
                out += say(f"ok {frame.n} hello 1 {frame.lease_ms}")
            elif isinstance(frame, Info):
                out += say(f"ok {frame.n} info {frame.page} {self.page(frame.page)}")
            elif isinstance(frame, Get) and self.settings is not None:
                values = self.settings.values[frame.page * PAGE : (frame.page + 1) * PAGE]
                out += say(f"ok {frame.n} get {frame.page} {' '.join(map(str, values))}")
        return out


def say(body: str) -> bytes:
    """Return the line of a body."""
    return seal(body.encode("ascii"))


def block_line(one: Block, signs: str = "ss") -> bytes:
    """Return the line of a block."""
    return seal(encode_block(one, signs))


def greet(link: Link, device: Device, now_s: float = 0.0) -> list[LinkEvent]:
    """Let link and device talk until neither has anything to say; return the link's events."""
    events: list[LinkEvent] = []
    for _ in range(100):
        out = link.take_output(now_s)
        if not out:
            break
        events += link.receive(device.answer(out), now_s)
    return events


def greeted(device: Device | None = None, *, lease_ms: int = 500) -> Link:
    """Return a link that has just been greeted at time 0."""
    link = Link(0.0, session=0xC0FFEE01, lease_ms=lease_ms)
    events = greet(link, device or Device())
    assert any(isinstance(event, Greeted) for event in events)
    return link
