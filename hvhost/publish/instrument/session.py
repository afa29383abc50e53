"""One connection: lines in, answers out, with its own registers, error queue and line of waiting; no socket, no clock.

Stops go ahead of everything (S7): a line is searched for them while its bytes are being taken, whatever waits, however
fast its sender is, and even where its grammar is broken elsewhere.  What the same connection sent before the stop and
was not carried out yet may still answer questions and program what the output is off for, but switches nothing on and
clears no latch any more.

A command may have to wait (``*WAI``, ``*OPC?``, a reading younger than its question).  Then it is a generator that is
resumed with each new picture of the bench; what came behind it waits in order.
"""

import re
from collections import deque
from collections.abc import Callable, Generator
from dataclasses import dataclass, field
from enum import IntFlag
from functools import lru_cache

from hvhost.publish.instrument import syntax
from hvhost.publish.instrument.device import Caller, Device, Ending
from hvhost.publish.instrument.errors import Err, ScpiError
from hvhost.publish.instrument.status import Status
from hvhost.publish.instrument.syntax import Broken, Message, Unit
from hvhost.publish.instrument.tree import Command, Tree, check_count

Waiting = Generator[None, None, str | None]

# What a line must hold to be searched for a stop; false alarms cost a look, nothing else.
_STOP_MARK = re.compile(rb"\*RST|ABOR|(?:OUTP|STAT)[A-Z]*1?(?::STAT(?:E)?)?[\x00-\x20]+(?:OFF|[-+.#0-9])", re.I)
_WHITE = bytes(range(33))
UNITS_A_TURN = 8
ALL_UNITS = syntax.UNITS_MAX + 1
TOLD_EVERY_S = 1.0
SHORTEST_S = 0.001  # a shorter wait is not worth a timer


class Stop(IntFlag):
    """What a unit stops."""

    LOWER = 1
    CUT = 2


NOTHING = Stop(0)


@dataclass(frozen=True, slots=True, kw_only=True)
class TalkLimits:
    """What one client may ask: commands a second and at once (more wait), lines and bytes waiting, losses in all."""

    rate_hz: float = 1000.0
    burst: float = 100.0
    waiting: int = 1_000
    waiting_bytes: int = 65_536
    lost_most: int = 2_000


@dataclass(slots=True)
class _Line:
    """One program message on its way: a stop overtook units before ``overtaken``; ``stopped`` was done on arrival."""

    line: bytes
    overtaken: int = 0
    stopped: Stop = NOTHING
    at: int = 0
    asked: tuple[int, float] = (-1, 0.0)  # the last measurement: the place behind its unit, since when it is asked for
    answers: list[str] = field(default_factory=list)
    waiting: Waiting | None = None


class Session:
    """``receive`` takes bytes, ``turn`` carries out one message, ``news`` takes a picture's consequences.

    ``send`` gets whole answer lines and never waits.  ``blocked`` is set by whoever owns the socket while the client
    does not read.
    """

    def __init__(self, device: Device, tree: Tree, caller: Caller, send: Callable[[bytes], None], now_s: float,
                 limits: TalkLimits | None = None, *, stops_only: bool = False) -> None:
        self.device, self.tree, self.caller, self.now_s = device, tree, caller, now_s
        self.status = Status()
        self.limits, self.stops_only = limits or TalkLimits(), stops_only
        self.blocked = False
        self.seated = False  # asked for the seat and got it
        self.completing = False  # *OPC was sent and its operations are pending
        self.lost = self.faults = 0
        self._send = send
        self._buffer = bytearray()
        self._skipping = False
        self._queue: deque[_Line] = deque()
        self._queued_bytes = 0
        self._active: _Line | None = None
        self._tokens, self._filled_s = self.limits.burst, now_s
        self._told_s = float("-inf")

    # ------------------------------------------------------------ bytes in

    @property
    def hopeless(self) -> bool:
        """More was lost than any honest client sends by mistake."""
        return self.lost > self.limits.lost_most

    def receive(self, data: bytes, now_s: float) -> None:
        """Take bytes: stops are carried out here and now, the rest is queued."""
        self.now_s = now_s
        lines = [_Line(line) for line in self._split(data)]
        if not lines:
            return
        self._look_for_stops(lines)
        lost = 0
        for line in lines:
            size = len(line.line)
            if (self.stops_only or len(self._queue) >= self.limits.waiting
                    or self._queued_bytes + size > self.limits.waiting_bytes):
                lost += 1
            else:
                self._queue.append(line)
                self._queued_bytes += size
        if lost:
            self._lose(lost)

    def no_more(self, now_s: float) -> None:
        """The client sends no more: what stands without a newline is torn, and counts only where it is a stop."""
        self.now_s = now_s
        self._look_for_stops([_Line(bytes(self._buffer))])
        self._buffer.clear()

    def ended(self, now_s: float) -> None:
        """The connection is gone: nothing of it is carried out any more, and the seat is free."""
        self.no_more(now_s)
        self._queue.clear()
        self._active, self._queued_bytes = None, 0
        if self.seated:
            self.seated = False
            self.attempt(lambda: self.device.ask("seat.release", {"ticket": self.caller.ticket}, self.caller))

    def _split(self, data: bytes) -> list[bytes]:
        self._buffer += data
        lines: list[bytes] = []
        if b"\n" in data:
            *lines, rest = bytes(self._buffer).split(b"\n")
            self._buffer = bytearray(rest)
            if self._skipping:
                self._skipping = False
                del lines[0]
        if len(self._buffer) > syntax.MESSAGE_MAX:
            self._lose(1)  # a line without an end counts for each stretch of it
            self._buffer.clear()
            self._skipping = True
        return [line for line in lines if line.strip(_WHITE)]

    def _lose(self, count: int) -> None:
        """Count what could not be taken, and tell at most once a second: an error for each would be a flood."""
        self.lost += count
        if self.now_s - self._told_s >= TOLD_EVERY_S:
            self._told_s = self.now_s
            if self.stops_only:
                self._send(b'-200,"Execution error;too many clients: this connection only stops"\n')
            elif self.blocked:
                self.status.error(Err.DEADLOCKED, "answers are not read")
            else:
                self.status.error(Err.INPUT_OVERRUN)

    # ------------------------------------------------------------ stops

    def _look_for_stops(self, lines: list[_Line]) -> None:
        """Carry out the strongest stop of these lines; what stands before the last one is overtaken."""
        found = NOTHING
        for at in range(len(lines) - 1, -1, -1):
            if _STOP_MARK.search(lines[at].line) is None:
                continue
            stops = stops_in(lines[at].line, self.tree)
            if stops and not found:
                self._overtake(lines[:at])
                lines[at].overtaken = stops[-1][0]
            for _, stop in stops:
                found |= stop
        if not found:
            return
        for line in lines:
            line.stopped |= found
        self.attempt(lambda: self.stop(found))

    def _overtake(self, before: list[_Line]) -> None:
        active = [self._active] if self._active is not None else []
        for line in (*before, *self._queue, *active):
            line.overtaken = ALL_UNITS

    def stop(self, stop: Stop) -> None:
        """Cut or lower; raises `ScpiError` where the bench cannot be reached."""
        if stop & Stop.CUT:
            self.device.cut(self.caller, self.now_s)
        else:
            self.device.lower(self.caller, self.now_s)

    def stopped_already(self, stop: Stop) -> bool:
        """Whether the message being carried out had this stop done on its arrival."""
        return self._active is not None and bool(self._active.stopped & stop)

    # ------------------------------------------------------------ carrying out

    @property
    def idle(self) -> bool:
        """Whether nothing is left to be carried out or answered."""
        return self._active is None and not self._queue

    @property
    def ready(self) -> bool:
        """Whether a message may be carried out now, its rate not counted."""
        if self.blocked:
            return False
        return bool(self._queue) if self._active is None else self._active.waiting is None

    @property
    def answering(self) -> bool:
        """MAV: whether an answer of the message being carried out waits."""
        return self._active is not None and bool(self._active.answers)

    def turn(self, now_s: float) -> float:
        """Carry out one message as far as it goes; returns the seconds until the next one's turn (0: at once)."""
        self.now_s = now_s
        self._tokens = min(self.limits.burst, self._tokens + (now_s - self._filled_s) * self.limits.rate_hz)
        self._filled_s = now_s
        if not self.ready:
            return 0.0
        if self._tokens < 1.0:
            return max(SHORTEST_S, (1.0 - self._tokens) / self.limits.rate_hz)
        if self._active is None:
            self._active = self._queue.popleft()
            self._queued_bytes -= len(self._active.line)
        self._carry_on(self._active)
        return 0.0

    def news(self, endings: tuple[Ending, ...], operation: int, questionable: int, now_s: float) -> None:
        """A new picture: conditions, what ended otherwise than wanted, *OPC."""
        self.now_s = now_s
        for ending in endings:
            if ending.caller in (None, self.caller.number) or self.waits:
                self.status.error(ending.number, ending.text)
        self.status.operation.show(operation)
        self.status.questionable.show(questionable)
        if self.completing and not self.device.busy:
            self.completing = False
            self.status.operation_complete()

    @property
    def waits(self) -> bool:
        """Whether a message waits for the bench."""
        return self._active is not None and self._active.waiting is not None

    def resume(self, now_s: float) -> None:
        """Go on with a message that waits, where what it waits for has come."""
        self.now_s = now_s
        if self._active is not None and self.waits and not self.blocked:
            self._carry_on(self._active)

    def _carry_on(self, active: _Line) -> None:
        message = parsed(active.line)
        if active.waiting is not None and not self._step(active, active.waiting):
            return
        last = active.at + UNITS_A_TURN
        while active.at < len(message):
            if active.at >= last:
                return  # others have their turn; this message goes on with the next one
            unit = message[active.at]
            active.at += 1
            self._tokens -= 1.0
            outcome = self._unit(active, unit)
            if outcome is None:
                active.at = len(message)
            elif not isinstance(outcome, str) and not self._step(active, outcome):
                return
            elif isinstance(outcome, str) and outcome:
                active.answers.append(outcome)
        self._active = None
        if active.answers:
            self._send((";".join(active.answers) + "\n").encode("ascii", "replace"))

    def _step(self, active: _Line, waiting: Waiting) -> bool:
        """Run a command that waits as far as it goes; whether it is done."""
        active.waiting = waiting
        try:
            next(waiting)
        except StopIteration as done:
            active.waiting = None
            if done.value:
                active.answers.append(str(done.value))
            return True
        except Exception as error:
            active.waiting = None
            self._told(error)
            return True
        return False

    def _unit(self, active: _Line, unit: Unit | Broken) -> str | Waiting | None:
        """Carry out one unit: its answer ('' for none), what waits, or None where the rest of the message is void.

        A command error voids the rest (IEEE 488.2, 6.1.9 lets a device do so): what follows may have relied on it.
        """
        if isinstance(unit, Broken):
            self._told(unit.error)
            return None
        try:
            command = self._command(unit)
            check_count(command, unit.params, query=unit.query)
            if command.overtakable and not unit.query and not stops(command, unit):
                self.need_not_overtaken()
            act = command.query if unit.query else command.act
            assert act is not None
            outcome = act(self, unit.params)
        except ScpiError as error:
            self._told(error)
            return None if -200 < error.number <= -100 else ""
        except Exception as error:
            self._told(error)
            return ""
        return outcome if outcome is not None else ""

    def _command(self, unit: Unit) -> Command:
        """The command of a unit; a stop is one also where only its own part of the header, from the root, says so."""
        try:
            return self.tree.find(unit.header, query=unit.query)
        except ScpiError:
            if stop_of(unit, self.tree) is not None:
                return self.tree.find(unit.written, query=unit.query)
            raise

    def need_not_overtaken(self) -> None:
        """Raise -200 where a stop came after the command that is being carried out, and was done before it."""
        if self._active is not None and self._active.at <= self._active.overtaken:
            raise ScpiError(Err.EXECUTION, "not carried out: overtaken by a stop")

    def attempt(self, act: Callable[[], object]) -> None:
        """Do something whose error belongs into the queue."""
        try:
            act()
        except Exception as error:
            self._told(error)

    def _told(self, error: Exception) -> None:
        """Queue an error; one that is no error of the standard is a fault of ours, told as such."""
        if isinstance(error, ScpiError):
            self.status.error(error.number, error.information)
        else:
            self.faults += 1
            self.status.error(Err.DEVICE, f"a fault of ours: {type(error).__name__}")

    # ------------------------------------------------------------ what commands wait for

    def asked_since(self) -> float:
        """Since when a measurement is asked for: those that follow each other in a message are taken together."""
        active = self._active
        if active is None:
            return self.now_s
        active.asked = (active.at, active.asked[1] if active.asked[0] == active.at - 1 else self.now_s)
        return active.asked[1]

    def until_done(self) -> Waiting:
        """Wait until no operation is pending, or a trip ends the wait."""
        trips = self.device.trips
        while self.device.busy and self.device.trips == trips:
            yield
        return None

    def until_seen(self, asked_s: float = float("-inf"), longest_s: float = 1.0) -> Waiting:
        """Wait for a picture younger than a moment and than the last act; raises -230 where none comes."""
        until_s = self.now_s + longest_s
        while not self.device.seen_since(asked_s):
            if self.now_s > until_s:
                raise ScpiError(Err.STALE, "nothing newer is known of the bench")
            yield
        return None


def stops(command: Command, unit: Unit) -> bool:
    """Whether this command stops the bench with these parameters."""
    return not unit.query and command.stop is not None and command.stop(unit.params)


@lru_cache(maxsize=256)
def parsed(line: bytes) -> Message:
    """The units of a line; the same few lines come again and again."""
    return syntax.parse_message(line)


@lru_cache(maxsize=256)
def stops_in(line: bytes, tree: Tree) -> tuple[tuple[int, Stop], ...]:
    """The stops of a line with their places among its units, in order."""
    found = []
    for at, unit in enumerate(parsed(line)):
        stop = stop_of(unit, tree) if isinstance(unit, Unit) else None
        if stop is not None:
            found.append((at, stop))
    return tuple(found)


def stop_of(unit: Unit, tree: Tree) -> Stop | None:
    """What a unit stops, if anything, by its whole header or by what was written of it."""
    for header in (unit.header, unit.written):
        if unit.query or not tree.has(header, query=False):
            continue
        command = tree.find(header, query=False)
        if stops(command, unit):
            return Stop.CUT if command.cuts else Stop.LOWER
    return None
