"""The bounded queue of requests: numbered, one outstanding, repeated with the same number, given up after some tries.

A request's number is taken when it is first sent.  Where an unanswered request was given up, it is not known whether
the MCU took its number; the next request then carries the number after it, and if that is refused as out of step the
lower number is tried.  A number is thus never used for a second request that could be mistaken for a repeat.
"""

from collections import deque
from dataclasses import dataclass, replace

from hvhost.wire.frames import Arm, Asked, Ok, Refusal, Segment, encode_request
from hvhost.wire.lines import seal
from hvhost.wire.vocabulary import Err
from hvhost.words.errors import CommandRefused

QUEUE_MAX = 64  # requests that wait; a plan's segments come by sixteens
ANSWER_S = 0.250  # a repeat is due after this; an answer behind a full block needs 60 ms at 115 200 Bd
TRIES = 4
UNTAKEN = frozenset({Err.UNKNOWN, Err.MALFORMED, Err.RANGE})  # answers after which the number may still be free
EPSILON_S = 1e-6  # a caller that wakes at the told deadline is not too early by a rounding
WRAP = 1 << 32


@dataclass(slots=True)
class Waiting:
    """One request on its way: ``ticket`` 0 for the link's own, ``number`` and ``line`` once it was sent."""

    ticket: int
    frame: Asked
    tries_max: int = TRIES
    number: int = 0
    line: bytes = b""
    tries: int = 0
    due_s: float = 0.0

    @property
    def sent(self) -> bool:
        """Whether it has left at least once."""
        return self.tries > 0


class Requests:
    """Numbers, sends, repeats and gives up requests."""

    __slots__ = ("_last", "_lowest", "_next", "_session", "out", "waiting")

    def __init__(self, session: int) -> None:
        self._session = session
        self._next = 1  # the number that the next request will carry
        self._lowest = 1  # the MCU expects a number from here to _next
        self._last: tuple[int, str] | None = None
        self.out: Waiting | None = None
        self.waiting: deque[Waiting] = deque()

    @property
    def next_number(self) -> int:
        """The number that the next request will carry."""
        return self._next

    def resume(self, number: int) -> None:
        """Go on with this number and nothing outstanding: a recording is played back."""
        self.restart()
        self._next = self._lowest = number

    def restart(self) -> None:
        """A session was opened: the next request carries 1, and nothing is outstanding."""
        self._next = self._lowest = 1
        self._last = self.out = None

    def add(self, ticket: int, frame: Asked) -> None:
        """Queue a request, or raise `CommandRefused` where the queue is full."""
        if len(self.waiting) >= QUEUE_MAX:
            raise CommandRefused(f"at most {QUEUE_MAX} waiting requests", "one more", "link", "wait for answers")
        self.waiting.append(Waiting(ticket, frame))

    def hello(self, number: int, frame: Asked, tries: int) -> None:
        """Put the opening request in front with a number of its own."""
        line = seal(encode_request(replace(frame, n=number, session=self._session)))
        self.out = Waiting(0, frame, tries, number, line)

    @property
    def idle(self) -> bool:
        """True where nothing waits and nothing is outstanding."""
        return self.out is None and not self.waiting

    def due(self, now_s: float) -> bytes:
        """Return the line to write now: the next request, or a repeat of the outstanding one."""
        out = self.out
        if out is None:
            if not self.waiting:
                return b""
            out = self.out = self.waiting.popleft()
            self._number(out, self._next)
            self._next = (self._next + 1) % WRAP
        elif out.tries and (now_s < out.due_s - EPSILON_S or out.tries >= out.tries_max):
            return b""
        out.tries += 1
        out.due_s = now_s + ANSWER_S
        return out.line

    def _number(self, waiting: Waiting, number: int) -> None:
        waiting.number = number
        waiting.line = seal(encode_request(replace(waiting.frame, n=number, session=self._session)))

    def answer(self, answer: Ok | Refusal) -> Waiting | None:
        """Return the request that this answers, done; None where none does (or where its number is tried again)."""
        out = self.out
        if out is None or out.number != answer.n or not out.sent or not self._verb_fits(out, answer):
            return None
        if isinstance(answer, Refusal) and answer.code == Err.NUMBER and out.number > self._lowest:
            self._number(out, out.number - 1)
            self._next, out.tries = out.number + 1, 0
            return None
        self.out, self._last = None, (answer.n, answer.verb)
        untaken = isinstance(answer, Refusal) and answer.code in UNTAKEN
        self._lowest = answer.n if untaken else self._next
        return out

    @staticmethod
    def _verb_fits(out: Waiting, answer: Ok | Refusal) -> bool:
        return out.line.startswith(answer.verb.encode("ascii") + b" ")

    def expected(self, answer: Ok | Refusal) -> bool:
        """Whether an answer that fits no outstanding request is a late or repeated one of a request once sent."""
        out = self.out
        if isinstance(answer, Refusal) and answer.code == Err.NUMBER:
            return True  # the twin of one that led to another number
        return (answer.n, answer.verb) == self._last or self._lowest <= answer.n < self._next or (
            out is not None and out.number == answer.n and self._verb_fits(out, answer))

    def expired(self, now_s: float) -> Waiting | None:
        """Give up the outstanding request where its tries are used up."""
        out = self.out
        if out is None or out.tries < out.tries_max or now_s < out.due_s - EPSILON_S:
            return None
        self.out = None
        return out

    def drop(self, *, all_of_them: bool) -> list[Waiting]:
        """Take out every arm and segment (or everything), sent or not; each is returned once and never sent again."""
        gone: list[Waiting] = []
        if self.out is not None and (all_of_them or isinstance(self.out.frame, Arm | Segment)):
            gone.append(self.out)
            self.out = None
        keep: deque[Waiting] = deque()
        for one in self.waiting:
            (gone if all_of_them or isinstance(one.frame, Arm | Segment) else keep).append(one)
        self.waiting = keep
        return gone

    def deadline(self, now_s: float) -> float | None:
        """When `due` or `expired` next has something to do."""
        if self.out is not None:
            return self.out.due_s if self.out.sent else now_s
        return now_s if self.waiting else None


