"""What leaves the MCU: blocks of pairs, numbered events, answers; bounded where nobody reads.

Events are numbered and sent from the boot on, and the last 16 are kept for asking; blocks leave from the first
greeting on.  A block is closed at ``block_pairs`` pairs, at a fifth of the lease, at a missed conversion, and where
state or latch change; its header is what held at its first pair's tick.
"""

from collections import deque

from hvhost.standin.core import U32, Core
from hvhost.wire.frames import Block, McuEvent, encode_answer, encode_block
from hvhost.wire.lines import seal
from hvhost.wire.vocabulary import EventKind

KEPT = 16  # events that can be asked for again
OUTPUT_MAX = 1 << 18  # bytes that wait when nobody takes them; what comes later is dropped and counted


def signed32(value: int) -> int:
    """The low 32 bits as a signed number."""
    return ((value & U32) ^ 0x80000000) - 0x80000000


class Stream:
    """Output buffer, event memory, open block."""

    def __init__(self, core: Core) -> None:
        self.core = core
        self.out = bytearray()
        self.dropped = 0
        self.open = False  # a session was greeted: blocks leave
        self.number = 0
        self.kept: deque[McuEvent] = deque(maxlen=KEPT)
        self.codes: list[int] = []
        self.limit = 2 * core.config.block_pairs
        self._head = (0, 0, 0, 0, 0, 0, 0, 0, 0, 0)

    def send(self, body: bytes) -> None:
        """Send an answer or an event."""
        self.send_lines(seal(body))

    def send_lines(self, lines: bytes, limit: int = 2 * OUTPUT_MAX) -> None:
        """Send whole lines, or drop and count them; blocks are dropped first, so that answers do not wait."""
        if len(self.out) > limit:
            self.dropped += 1
            return
        self.out += lines

    def greet(self, lease_ms: int) -> None:
        """A session begins: blocks leave, and are closed by its lease from now on."""
        config = self.core.config
        self.close_block()
        self.open = True
        pairs = config.ticks(lease_ms) // 5 // config.sample_ticks
        self.limit = 2 * max(1, min(config.block_pairs, pairs))

    def event(self, kind: EventKind, a: int, b: int) -> None:
        """Number, keep and send."""
        self.number = self.number + 1 & U32
        core = self.core
        event = McuEvent(number=self.number, tick=core.wire_tick(core.now), kind=kind, a=signed32(a), b=signed32(b))
        self.kept.append(event)
        self.send(encode_answer(event))

    def since(self, number: int) -> list[McuEvent] | None:
        """The kept events from this number on; None when some of them are gone."""
        wanted = (self.number - number + 1) & U32  # how many
        if wanted > KEPT or wanted > len(self.kept):
            return None
        return list(self.kept)[len(self.kept) - wanted :]

    def begin_block(self) -> None:
        """Note the header for the pair that is about to be added."""
        core = self.core
        self._head = (core.index & U32, core.wire_tick(core.now), core.v_word, core.i_word, int(core.state),
                      int(core.latched), core.inputs, core.missed & U32, self.number, core.reaction.number)

    def close_block(self) -> None:
        """Send the open block, if any."""
        if self.codes:
            codes, self.codes = self.codes, []
            block = Block(*self._head, tuple(codes))
            self.send_lines(seal(encode_block(block, self.core.config.signs)), OUTPUT_MAX)
