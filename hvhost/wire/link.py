"""The host's end of the line: a pure machine, bytes and time in, events and bytes out.

One `Link` is one session.  It greets by itself (hello, four information pages, the settings), then carries requests
one at a time, renewals of the lease, and the three stops.  When it tells `Ended`, the caller makes another one with
another session number and ``first_stop=old.next_stop``; a cut still leaves from an ended link.

The order of use in a read callback is: ``receive(data, now_s)``, judge each `BlockIn`, ``cut``/``lower``/``arc`` or
``renew``, write ``take_output(now_s)``; and at ``deadline()``: ``timer(now_s)``, write ``take_output(now_s)``.
Where the port took only a part of the output, ``unsent(rest)`` hands the rest back.

Nothing here waits, logs or opens anything.
"""

from collections.abc import Mapping
from dataclasses import replace

from hvhost.wire.events import (
    Answered,
    BlockIn,
    CutConfirmed,
    CutState,
    Dropped,
    DropWhy,
    Ended,
    EndWhy,
    Escalated,
    EventIn,
    Fault,
    GarbledIn,
    Greeted,
    LinkEvent,
    LinkState,
    Silent,
    StopAnswered,
)
from hvhost.wire.frames import (
    STOPS,
    VERB_OF,
    Arm,
    Asked,
    Block,
    Hello,
    McuEvent,
    Ok,
    Refusal,
    Segment,
    decode_block,
    decode_received,
    decode_request,
    encode_request,
    renewal,
)
from hvhost.wire.greeter import Greeter
from hvhost.wire.greeting import Greeting
from hvhost.wire.lines import Garbled, LineReader, seal
from hvhost.wire.outbox import Outbox
from hvhost.wire.requests import Requests, Waiting
from hvhost.wire.stops import WRAP, Stops
from hvhost.wire.vocabulary import Err, EventKind, Fitted, HostRule
from hvhost.words.errors import CommandRefused, WireFault

__all__ = [
    "Answered", "BlockIn", "CutConfirmed", "CutState", "DropWhy", "Dropped", "EndWhy", "Ended", "Escalated",
    "EventIn", "Fault", "GarbledIn", "Greeted", "Link", "LinkEvent", "LinkState", "Silent", "StopAnswered",
]

HELLO_TRIES = 8  # with 250 ms each: a board that starts when its port is opened has 2 s
HELLO_BIT = 1 << 31  # the number of a hello has this bit, so that it is never the number of a later request
RENEWALS_PER_LEASE = 8
GREETED, CUT_ANSWERED = LinkState.GREETED, CutState.ANSWERED  # looked at for every block: names of this module


class Link:
    """One session with one MCU; see the module's docstring for the order of use."""

    __slots__ = ("_blocks_before", "_ended_text", "_fitted", "_garbled", "_good", "_greeter", "_heard_s", "_last_s",
                 "_notices", "_outbox", "_reader", "_renewed_s", "_requests", "_silent", "_stops", "_ticket",
                 "greeting", "last_event", "lease_s", "session", "state")

    def __init__(self, now_s: float, *, session: int, lease_ms: int, first_stop: int = 1) -> None:
        if not 1 <= session < WRAP:
            raise CommandRefused("a session number from 1 to 4294967295", str(session), "link")
        self.session, self.lease_s = session, lease_ms / 1000
        self.state = LinkState.GREETING
        self.greeting: Greeting | None = None
        self.last_event = 0  # highest event number seen
        self._reader, self._stops, self._requests = LineReader(), Stops(session, first_stop), Requests(session)
        self._greeter = Greeter(session, lease_ms)
        self._requests.hello(session | HELLO_BIT, self._greeter.hello(), HELLO_TRIES)
        self._fitted: Fitted | None = None
        self._notices: list[LinkEvent] = []
        self._good = self._garbled = self._blocks_before = self._ticket = 0
        self._heard_s = self._last_s = now_s
        self._renewed_s: float | None = None
        self._outbox = Outbox()
        self._silent = False
        self._ended_text = ""

    @classmethod
    def resumed(cls, now_s: float, greeting: Greeting, numbers: Mapping[str, float]) -> "Link":
        """A link as it stood when ``numbers`` were taken, greeted and with nothing outstanding: for a replay."""
        link = cls(now_s, session=greeting.session, lease_ms=round(greeting.lease_s * 1000),
                   first_stop=int(numbers["stop"]))
        link._requests.resume(int(numbers["request"]))
        link._ticket, link.last_event = int(numbers["ticket"]), int(numbers["event"])
        link._renewed_s = numbers["renewed_s"] if numbers["renewed_s"] >= 0.0 else None
        link.greeting, link._fitted, link.state = greeting, greeting.fitted, LinkState.GREETED
        return link

    def numbers(self) -> dict[str, float]:
        """The counters that `resumed` goes on with."""
        return {"request": self._requests.next_number, "stop": self._stops.next_number, "ticket": self._ticket,
                "event": self.last_event, "renewed_s": -1.0 if self._renewed_s is None else self._renewed_s}

    # ------------------------------------------------------------ what the caller may ask

    @property
    def cut_state(self) -> CutState:
        """How far the last cut has got: none, sent, answered, confirmed."""
        return self._stops.cut_state

    @property
    def stop_confirmed(self) -> bool:
        """True when the last cut is confirmed (S7)."""
        return self._stops.cut_state is CutState.CONFIRMED

    @property
    def stopping(self) -> bool:
        """True while a stop waits for its answer or a cut for its confirmation."""
        return self._stops.stopping

    @property
    def next_stop(self) -> int:
        """The ``first_stop`` of the link that follows this one."""
        return self._stops.next_number

    @property
    def waiting_requests(self) -> int:
        """Requests that wait or are outstanding."""
        return len(self._requests.waiting) + (self._requests.out is not None)

    @property
    def counters(self) -> dict[str, int]:
        """Good lines, garbled lines, and blocks that came before the greeting told how to read them."""
        return {"good": self._good, "garbled": self._garbled, "blocks_before_greeting": self._blocks_before}

    # ------------------------------------------------------------ bytes in

    def receive(self, data: bytes, now_s: float) -> list[LinkEvent]:
        """Take bytes from the port and return what they say, in order."""
        events = self._begin(now_s)
        stops = self._stops
        for body in self._reader.feed(data):
            if isinstance(body, Garbled):
                self._garbled += 1
                events.append(GarbledIn(body))
                continue
            self._good += 1
            self._heard_s, self._silent = now_s, False
            if body[:2] == b"b ":
                greeting = self.greeting
                if greeting is None:
                    self._blocks_before += 1
                    continue
                try:
                    block = decode_block(body, greeting.info.signs)
                except WireFault as fault:
                    events.append(Fault(str(fault)))
                    continue
                events.append(BlockIn(block))
                if stops.cut_state is CUT_ANSWERED and stops.look(block, self._fitted):
                    events.append(CutConfirmed(stops.cut_number))
            else:
                self._other(body, now_s, events)
        return events

    def _other(self, body: bytes, now_s: float, events: list[LinkEvent]) -> None:
        try:
            frame = decode_received(body, "uu")
        except WireFault as fault:
            events.append(Fault(str(fault)))
            return
        if isinstance(frame, McuEvent):
            self._event(frame, events)
        elif not isinstance(frame, Block):
            if frame.verb in STOPS:
                self._stop_answer(frame, now_s, events)
            else:
                self._answer(frame, events)

    def _event(self, event: McuEvent, events: list[LinkEvent]) -> None:
        events.append(EventIn(event))
        self._stops.event(event)
        fresh = event.number > self.last_event
        self.last_event = max(self.last_event, event.number)
        greeting = self.greeting
        if greeting is None or self.state is not LinkState.GREETED:
            return
        if event.kind == EventKind.BOOT and event.b % WRAP != greeting.info.boot:
            self._end(EndWhy.REBOOTED, f"boot counter {event.b % WRAP}, was {greeting.info.boot}", events)
        elif event.kind == EventKind.SESSION and fresh and event.a % WRAP != self.session:
            self._end(EndWhy.SESSION, f"session {event.a % WRAP:08X} was opened", events)

    def _stop_answer(self, frame: Ok | Refusal, now_s: float, events: list[LinkEvent]) -> None:
        if not self._stops.answer(frame):
            return  # the answer to a repeat, or to a stop that a cut has overtaken
        events.append(StopAnswered(frame.verb, frame.n, frame))
        if isinstance(frame, Refusal) and frame.verb != "cut":
            events.append(Escalated(frame.verb, frame.n, self.cut(HostRule.UNCONFIRMED, now_s)))
            self._flush_notices(events)

    def _answer(self, frame: Ok | Refusal, events: list[LinkEvent]) -> None:
        done = self._requests.answer(frame)
        if done is None:
            if not self._requests.expected(frame):
                events.append(Fault(f"answer to a request that was not made: {frame.verb} {frame.n}"))
            return
        if done.ticket:
            events.append(Answered(done.ticket, done.frame, frame))
        else:
            self._greet(done, frame, events)
        if isinstance(frame, Refusal) and self.state is not LinkState.ENDED:
            if frame.code == Err.SESSION:
                self._end(EndWhy.SESSION, "the MCU does not know this session", events)
            elif frame.code == Err.NUMBER:
                self._end(EndWhy.NUMBER, f"request {frame.n} refused", events)

    # ------------------------------------------------------------ the greeting

    def _greet(self, done: Waiting, answer: Ok | Refusal, events: list[LinkEvent]) -> None:
        step = self._greeter.take(done.frame, answer)
        if isinstance(step, Ended):
            self._end(step.why, step.text, events)
        elif isinstance(step, Greeting):
            self.greeting, self._fitted, self.state = step, step.fitted, LinkState.GREETED
            self.last_event = max(self.last_event, step.info.event)
            if step.settings is None and not step.info.blank:
                events.append(Fault(step.why_none))
            events.append(Greeted(step))
        else:
            if isinstance(done.frame, Hello):
                self._requests.restart()
            for frame in step:
                self._requests.add(0, frame)

    # ------------------------------------------------------------ requests and renewals

    def request(self, frame: Asked) -> int:
        """Queue a request (its ``n`` and ``session`` are filled in here); return its ticket.

        Raises `CommandRefused`: not greeted, ended, queue full, a field out of range, or an arm or segment while a
        stop is under way.  Each ticket comes back once, as `Answered` or as `Dropped`.
        """
        verb = VERB_OF[type(frame)]
        if isinstance(frame, Hello):
            raise CommandRefused("any request but hello, which opens another session", verb, "link", "make a new link")
        if self.state is not LinkState.GREETED:
            raise CommandRefused("a greeted link", f"{self.state} {self._ended_text}".rstrip(), "link", "relink")
        if self.stopping and isinstance(frame, Arm | Segment):
            raise CommandRefused("no stop under way", f"cut {self.cut_state}" if self._stops.cutting else "a stop",
                                 verb, "wait until the stop is answered and a cut confirmed")
        try:
            whole = replace(frame, session=self.session)
            if decode_request(encode_request(whole)) != whole:
                raise WireFault("fields that the grammar can carry", repr(frame), verb)
        except WireFault as fault:
            raise CommandRefused(fault.expected, fault.found, verb) from None
        self._ticket += 1
        self._requests.add(self._ticket, frame)
        return self._ticket

    def renew(self, index: int, now_s: float) -> bool:
        """Renew the lease by the last sample judged; only the protective chain may call this, after it judged.

        False where nothing is sent: not greeted, a cut not yet confirmed, or sooner than lease/8 after the last one.
        """
        if self._renewed_s is not None and now_s - self._renewed_s < self.lease_s / RENEWALS_PER_LEASE:
            return False
        if self.state is not GREETED or self._stops.cutting or self._outbox.rest:
            return False
        self._renewed_s = now_s
        self._outbox.renewal = seal(renewal(self.session, index % WRAP))
        return True

    # ------------------------------------------------------------ stops

    def cut(self, rule: int, now_s: float) -> int:
        """Decide to cut (``rule`` 0 for an operator, else a `HostRule`); works in every state; returns its number."""
        number = self._stops.cut(rule, now_s)
        self._outbox.renewal = b""
        self._drop(DropWhy.STOP)
        return number

    def lower(self, now_s: float) -> int:
        """Decide to lower; where no session is open it is a cut; returns its number."""
        if self.state is not LinkState.GREETED:
            return self.cut(HostRule.OPERATOR, now_s)
        number = self._stops.lower(now_s)
        self._drop(DropWhy.STOP)
        return number

    def arc(self, index: int, now_s: float) -> int:
        """Tell of a breakdown judged at this sample index; where no session is open it is a cut; returns its number."""
        if self.state is not LinkState.GREETED:
            return self.cut(HostRule.BREAKDOWN, now_s)
        number = self._stops.arc(index, now_s)
        self._drop(DropWhy.STOP)
        return number

    def _drop(self, why: DropWhy) -> None:
        if self._requests.idle:
            return
        gone = self._requests.drop(all_of_them=why is DropWhy.ENDED)
        self._notices += [Dropped(one.ticket, one.frame, why, one.sent) for one in gone if one.ticket]

    # ------------------------------------------------------------ time

    def timer(self, now_s: float) -> list[LinkEvent]:
        """Do what is due by time alone and return what it says."""
        events = self._begin(now_s)
        late = self._stops.overdue(now_s)
        if late is not None:
            events.append(Escalated(*late, self.cut(HostRule.UNCONFIRMED, now_s)))
        gone = self._requests.expired(now_s)
        if gone is not None and gone.ticket:
            events.append(Dropped(gone.ticket, gone.frame, DropWhy.UNANSWERED, True))
        elif gone is not None and self.state is LinkState.GREETING:
            self._no_greeting(gone, events)
        if self.state is LinkState.GREETED and not self._silent and now_s - self._heard_s >= self.lease_s:
            self._silent = True
            events.append(Silent(now_s - self._heard_s))
        self._flush_notices(events)
        return events

    def _no_greeting(self, gone: Waiting, events: list[LinkEvent]) -> None:
        if self._garbled and not self._good:
            self._end(EndWhy.NOT_OURS, f"{self._garbled} lines, none of them in this protocol", events)
        else:
            self._end(EndWhy.SILENT, f"no answer to {VERB_OF[type(gone.frame)]} after {gone.tries} tries", events)

    def deadline(self) -> float | None:
        """When `timer` and `take_output` next have something to do without new bytes."""
        times = [self._stops.deadline()]
        if self.state is not LinkState.ENDED and not self._outbox.rest:  # a rest waits for room, not for time
            times.append(self._last_s if self._outbox.renewal else self._requests.deadline(self._last_s))
        if self.state is LinkState.GREETED and not self._silent:
            times.append(self._heard_s + self.lease_s)
        return min((t for t in times if t is not None), default=None)

    def _begin(self, now_s: float) -> list[LinkEvent]:
        """Note the time; after a stall longer than the lease no arm, segment or half-sent line may leave any more."""
        if now_s - self._last_s > self.lease_s and self.state is LinkState.GREETED:
            self._drop(DropWhy.STALL)
            self._outbox.stale()
        self._last_s = now_s
        events: list[LinkEvent] = []
        if self._notices:
            self._flush_notices(events)
        return events

    def _flush_notices(self, events: list[LinkEvent]) -> None:
        events += self._notices
        self._notices = []

    def _end(self, why: EndWhy, text: str, events: list[LinkEvent]) -> None:
        self.state, self._ended_text, self._outbox.renewal = LinkState.ENDED, str(why), b""
        self._drop(DropWhy.ENDED)
        self._flush_notices(events)
        events.append(Ended(why, text))

    # ------------------------------------------------------------ bytes out

    def take_output(self, now_s: float) -> bytes:
        """Return all that is due now, stops first; what the port does not take comes back through `unsent`."""
        if now_s - self._last_s > self.lease_s:
            self._notices = self._begin(now_s)
        outbox, requests = self._outbox, self._requests
        if not (outbox.renewal or outbox.rest or requests.out or requests.waiting) and self._nothing_else:
            return b""
        out, more = self._outbox.take(self._stops.due(now_s))
        if more and self.state is not LinkState.ENDED:
            out += self._requests.due(now_s)
        return out

    @property
    def _nothing_else(self) -> bool:
        """No stop waits, and no torn line asks for an LF."""
        return self._outbox.empty and not self._stops.waiting

    def unsent(self, rest: bytes) -> None:
        """Take back what the port did not accept; it leaves before anything new, but never before a stop."""
        self._outbox.rest = rest
