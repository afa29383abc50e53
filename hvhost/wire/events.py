"""What a link tells its caller: frozen values, in the order in which the bytes arrived.

Nothing here is an exception.  What the caller asked wrongly is raised as `CommandRefused`; what the device said
wrongly is a `Fault` or a `GarbledIn`, for the supervisor to judge.
"""

from dataclasses import dataclass
from enum import StrEnum

from hvhost.wire.frames import Asked, Block, McuEvent, Ok, Refusal
from hvhost.wire.greeting import Greeting
from hvhost.wire.lines import Garbled


class LinkState(StrEnum):
    """A link greets once, is greeted, and ends; relinking takes a new link with a new session."""

    GREETING = "greeting"
    GREETED = "greeted"
    ENDED = "ended"


class CutState(StrEnum):
    """How far the last cut has got."""

    NONE = "none"
    SENT = "sent"
    ANSWERED = "answered"
    CONFIRMED = "confirmed"


class DropWhy(StrEnum):
    """Why a request was given up."""

    STOP = "a stop was decided"
    STALL = "the host stalled for longer than the lease"
    UNANSWERED = "not answered"
    ENDED = "the session ended"


class EndWhy(StrEnum):
    """Why a session ended or never began."""

    SILENT = "no answer"
    NOT_OURS = "another device"
    VERSION = "another protocol version"
    REFUSED = "greeting refused"
    MALFORMED = "greeting malformed"
    REBOOTED = "the MCU restarted"
    SESSION = "the MCU follows another session"
    NUMBER = "request numbers out of step"


@dataclass(frozen=True, slots=True)
class BlockIn:
    """A block of pairs; only after `Greeted`, since its coding is told there."""

    block: Block


@dataclass(frozen=True, slots=True)
class EventIn:
    """An event of the MCU, fresh or asked for again."""

    event: McuEvent


@dataclass(frozen=True, slots=True)
class Answered:
    """The answer to the request with this ticket."""

    ticket: int
    request: Asked
    answer: Ok | Refusal


@dataclass(frozen=True, slots=True)
class Dropped:
    """A request was given up; where ``sent`` the MCU may have obeyed it all the same."""

    ticket: int
    request: Asked
    why: DropWhy
    sent: bool


@dataclass(frozen=True, slots=True)
class Greeted:
    """The greeting is complete."""

    greeting: Greeting


@dataclass(frozen=True, slots=True)
class StopAnswered:
    """A cut, lower or arc with this number was answered."""

    verb: str
    number: int
    answer: Ok | Refusal


@dataclass(frozen=True, slots=True)
class Escalated:
    """A lower or arc was refused or not answered in time, so this cut was sent."""

    verb: str
    number: int
    cut: int


@dataclass(frozen=True, slots=True)
class CutConfirmed:
    """The cut was answered, and a later block shows words at zero and every fitted read-back in its cut position."""

    number: int


@dataclass(frozen=True, slots=True)
class GarbledIn:
    """A line was dropped."""

    garbled: Garbled


@dataclass(frozen=True, slots=True)
class Fault:
    """The device said what it cannot mean."""

    what: str


@dataclass(frozen=True, slots=True)
class Silent:
    """No good line for one lease; told once, until the next good line."""

    age_s: float


@dataclass(frozen=True, slots=True)
class Ended:
    """The session is over; blocks and events are still passed on and a cut can still be sent, nothing else."""

    why: EndWhy
    text: str


LinkEvent = (BlockIn | EventIn | Answered | Dropped | Greeted | StopAnswered | Escalated | CutConfirmed | GarbledIn
             | Fault | Silent | Ended)
