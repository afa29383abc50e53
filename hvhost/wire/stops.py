"""The three stops and their repetition: cut, lower, arc; pure, with the time as an argument.

A stop is written before every other unsent byte, begins with LF so that a torn line in front cannot swallow it, is
repeated every 20 ms until it is answered, and is idempotent at the MCU.  A lower or arc that is refused, or not
answered within 100 ms of the decision, becomes a cut.  A cut is confirmed by its answer *and* a block taken after
it that shows words at zero and every fitted read-back in its cut position (PROTOCOL.md section 7, S7).
"""

from dataclasses import dataclass

from hvhost.wire.events import CutState
from hvhost.wire.frames import Block, McuEvent, Ok, Refusal
from hvhost.wire.lines import seal
from hvhost.wire.vocabulary import EventKind, Fitted, HostRule, Inputs, McuState

REPEAT_S = 0.020
ESCALATE_S = 0.100
EPSILON_S = 1e-6  # a caller that wakes at the told deadline is not too early by a rounding
ARCS_MAX = 8  # arcs waiting for an answer; a ninth within 100 ms is no longer a matter of pausing: it cuts
WRAP = 1 << 32
_CUTTING = (CutState.SENT, CutState.ANSWERED)


@dataclass(slots=True)
class _Pending:
    verb: str
    number: int
    rule: int
    line: bytes
    decided_s: float
    due_s: float


def _line(body: bytes) -> bytes:
    """A stop as it leaves; bodies are written the short way, the tests hold them against the table's."""
    return b"\n" + seal(body)


def in_cut_position(block: Block, fitted: Fitted) -> bool:
    """Whether the block's status shows the state off, words at zero and every fitted read-back as after a cut."""
    if block.state != McuState.OFF or block.v_word or block.i_word:
        return False
    inputs = block.inputs
    if fitted & Fitted.INHIBIT_BACK and not inputs & Inputs.INHIBIT_BACK:
        return False
    if fitted & Fitted.RELAY_BACK and inputs & Inputs.RELAY_BACK:
        return False
    fed = Fitted.DANGER | Fitted.DANGER_FROM_RELAY
    return not (fitted & fed == fed and inputs & Inputs.DANGER)


class Stops:
    """The stops that wait for an answer, and how far the last cut has got."""

    __slots__ = ("_blocks", "_cut", "_cut_tick", "_lower", "_next", "_session", "arcs", "cut_number", "cut_state")

    def __init__(self, session: int, first: int) -> None:
        self._session, self._next = session, first
        self._cut: _Pending | None = None
        self._lower: _Pending | None = None
        self.arcs: list[_Pending] = []
        self.cut_state = CutState.NONE
        self.cut_number = 0
        self._cut_tick: int | None = None
        self._blocks = 0

    def _take_number(self) -> int:
        number, self._next = self._next, (self._next + 1) % WRAP
        return number

    @property
    def next_number(self) -> int:
        """The number of the next stop, for the link that follows this one."""
        return self._next

    @property
    def cutting(self) -> bool:
        """True from the decision to cut until the cut is confirmed."""
        return self.cut_state in _CUTTING

    @property
    def stopping(self) -> bool:
        """True while any stop waits for its answer or a cut for its confirmation."""
        return (self.cut_state in _CUTTING or self._cut is not None or self._lower is not None or bool(self.arcs))

    @property
    def waiting(self) -> bool:
        """True while any stop waits for its answer."""
        return self._cut is not None or self._lower is not None or bool(self.arcs)

    def cut(self, rule: int, now_s: float) -> int:
        """Decide to cut; return the stop number.  A cut for a rule absorbs later ones until it is answered."""
        if self._cut is not None and (self._cut.rule or not rule):
            return self._cut.number
        number = self._take_number()
        self._cut = _Pending("cut", number, rule, _line(b"cut %d %d" % (number, rule)), now_s, now_s)
        self._lower, self.arcs = None, []
        self.cut_state, self.cut_number, self._cut_tick, self._blocks = CutState.SENT, number, None, 0
        return number

    def lower(self, now_s: float) -> int:
        """Decide to lower; return the stop number (that of a waiting cut or lower where there is one)."""
        waiting = self._cut or self._lower
        if waiting is not None:
            return waiting.number
        number = self._take_number()
        self._lower = _Pending("lower", number, 0, _line(b"lower %d %08X" % (number, self._session)), now_s, now_s)
        return number

    def arc(self, index: int, now_s: float) -> int:
        """Tell of a breakdown that the host judged at this sample; return the stop number."""
        if self._cut is not None:
            return self._cut.number
        if len(self.arcs) >= ARCS_MAX:
            return self.cut(HostRule.BREAKDOWN, now_s)
        number = self._take_number()
        line = _line(b"arc %d %08X %d" % (number, self._session, index % WRAP))
        self.arcs.append(_Pending("arc", number, 0, line, now_s, now_s))
        return number

    def _all(self) -> list[_Pending]:
        return [p for p in (self._cut, self._lower, *self.arcs) if p is not None]

    def due(self, now_s: float) -> bytes:
        """Return the stop lines to write now, the cut first."""
        if self._cut is None and self._lower is None and not self.arcs:
            return b""
        out = b""
        for pending in self._all():
            if now_s >= pending.due_s - EPSILON_S:
                pending.due_s = now_s + REPEAT_S
                out += pending.line
        return out

    def deadline(self) -> float | None:
        """When `due` or `overdue` next has something to do."""
        times = [p.due_s if p.verb == "cut" else min(p.due_s, p.decided_s + ESCALATE_S) for p in self._all()]
        return min(times, default=None)

    def overdue(self, now_s: float) -> tuple[str, int] | None:
        """Return verb and number of a lower or arc that has waited too long for its answer."""
        for pending in self._all():
            if pending.verb != "cut" and now_s - pending.decided_s >= ESCALATE_S - EPSILON_S:
                return pending.verb, pending.number
        return None

    def answer(self, answer: Ok | Refusal) -> bool:
        """Take the answer to a stop; False where none with this verb and number waits."""
        cut, lower = self._cut, self._lower
        if answer.verb == "cut" and cut is not None and cut.number == answer.n:
            if isinstance(answer, Refusal):
                return True  # a cut is never refused: go on repeating it
            self._cut, self.cut_state, self._blocks = None, CutState.ANSWERED, 0
            return True
        if answer.verb == "lower" and lower is not None and lower.number == answer.n:
            self._lower = None
            return True
        left = [p for p in self.arcs if answer.verb != "arc" or p.number != answer.n]
        known, self.arcs = len(left) != len(self.arcs), left
        return known

    def event(self, event: McuEvent) -> None:
        """Remember the tick at which the MCU says that it carried the last cut out."""
        if event.kind == EventKind.CUT and event.b == self.cut_number and self.cutting:
            self._cut_tick = event.tick

    def look(self, block: Block, fitted: Fitted | None) -> bool:
        """Judge a block after the answer; True when it confirms the cut.

        A block was taken after the cut if it began after the cut's tick, where the event told it, or else if it is
        the second one after the answer: the first may have begun before the cut.
        """
        self._blocks += 1
        if fitted is None or self.cut_state is not CutState.ANSWERED:
            return False
        tick = self._cut_tick
        later = self._blocks >= 2 or (tick is not None and 0 < (block.tick - tick) % WRAP < WRAP // 2)
        if not later or not in_cut_position(block, fitted):
            return False
        self.cut_state = CutState.CONFIRMED
        return True
