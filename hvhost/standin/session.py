"""The session: which lines are obeyed, in which order, and what is answered.

Every request but ``cut`` carries the session's number.  Numbered requests are obeyed once: the last number again gets
the last answer again, the next number is obeyed, any other is refused.  The three stops stand outside the numbering.
"""

import re
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

from hvhost.standin.core import LIVE, U32, Core
from hvhost.standin.stream import signed32
from hvhost.wire import frames
from hvhost.wire.frames import decode_request, encode_answer
from hvhost.wire.lines import Garbled, LineReader, seal
from hvhost.wire.settings import BY_KEY, KEYS, PAGE, PAGES, Settings, checksum
from hvhost.wire.vocabulary import (
    PROTOCOL_VERSION,
    Cause,
    CutWhy,
    Err,
    EventKind,
    Inputs,
    LowerWhy,
    McuState,
    ResetCause,
)
from hvhost.words.errors import WireFault

LEASE_MS = (100, 2_000)  # bounds without settings
RULE_MAX = 999  # a rule of a newer host is latched as this
VERB_MAX = 16
RANGE = re.compile(r"-?[0-9]+ to [0-9]+")  # what a decoder expected of a number that was out of its range
WORD = frozenset("abcdefghijklmnopqrstuvwxyz0123456789")


@dataclass(frozen=True, slots=True)
class Done:
    """A positive answer: its positional words, its ``key=value`` fields, and lines that follow it."""

    words: str = ""
    pairs: str = ""
    more: bytes = b""


Result = Done | Err


class Session:
    """Reads lines, keeps the numbering, obeys."""

    def __init__(self, core: Core) -> None:
        self.core = core
        self.reader = LineReader()
        self.garbled = 0
        self.unanswered = 0  # lines that got no answer: malformed renewals, renewals of another session
        self.number: int | None = None  # of the session
        self.reset_cause = ResetCause.POWER
        self._next = 1
        self._answered: tuple[int, bytes] | None = None  # the last request's number and its answer's lines
        self._staged: dict[str, int] | None = None
        self._requests: dict[type, Callable[[Any], Result]] = {
            frames.Info: self._info, frames.Get: self._get, frames.Put: self._put, frames.Save: self._save,
            frames.Arm: self._arm, frames.Segment: self._segment, frames.Reset: self._reset,
            frames.Again: self._again, frames.Snap: self._snap, frames.Stored: self._stored}

    def boot(self, cause: ResetCause) -> None:
        """After a reset: no session, no torn line, nothing staged."""
        self.reader = LineReader()
        self.number, self._staged, self._answered = None, None, None
        self.reset_cause = cause

    def feed(self, data: bytes) -> None:
        """Take bytes from the line."""
        for body in self.reader.feed(data):
            if isinstance(body, Garbled):
                self.garbled += 1
            else:
                self._take(body)

    # ---------------------------------------------------------------- one line

    def _take(self, body: bytes) -> None:
        core = self.core
        try:
            frame = decode_request(body)
        except WireFault as fault:
            self._malformed(body, fault)
            return
        if isinstance(frame, frames.Cut):
            self._cut(frame.n, frame.rule)
        elif isinstance(frame, frames.Hello):
            self._greet(frame)
        elif isinstance(frame, frames.Renew):
            if frame.session == self.number:
                core.lease.renew(frame.index)
            else:
                self.unanswered += 1
        elif frame.session != self.number:
            self._refuse(frame.n, frames.VERB_OF[type(frame)], Err.SESSION)
        elif isinstance(frame, frames.Lower):
            core.lower(LowerWhy.HOST, frame.n)
            core.stream.send(b"ok %d lower" % frame.n)
        elif isinstance(frame, frames.ArcSeen):
            core.stream.send(b"ok %d arc %d" % (frame.n, core.reaction.host(frame.index)))
        else:
            self._numbered(frame)

    def _numbered(self, frame: Any) -> None:
        verb = frames.VERB_OF[type(frame)]
        if self._in_order(frame.n, verb):
            self._answer(frame.n, verb, self._requests[type(frame)](frame))

    def _in_order(self, n: int, verb: str) -> bool:
        """Whether this number is the next; the last one again gets its answer again, any other is refused."""
        if self._answered and n == self._answered[0]:
            self.core.stream.send_lines(self._answered[1])
            return False
        if n != self._next:
            self._refuse(n, verb, Err.NUMBER)
            return False
        return True

    def _answer(self, n: int, verb: str, result: Result) -> None:
        self._next = n + 1 & U32
        self._answered = n, self._line(n, verb, result)
        self.core.stream.send_lines(self._answered[1])

    def _line(self, n: int, verb: str, result: Result) -> bytes:
        if isinstance(result, Err):
            return seal(f"err {n} {verb} {result}".encode("ascii"))
        body = " ".join(part for part in (f"ok {n} {verb}", result.words, result.pairs) if part)
        return seal(body.encode("ascii")) + result.more

    def _refuse(self, n: int, verb: str, err: Err) -> None:
        self.core.stream.send(f"err {n} {verb} {err}".encode("ascii"))

    def _malformed(self, body: bytes, fault: WireFault) -> None:
        """Answer a line that cannot be decoded; nothing of it is done."""
        verb, *rest = body.decode("ascii").split(" ")
        number = rest[0] if rest else ""
        n = int(number) if number.isdigit() and len(number) <= 10 and int(number) <= U32 else 0
        if verb == "renew":
            self.unanswered += 1
            return
        known = verb if len(verb) <= VERB_MAX and verb[:1].isalpha() and WORD.issuperset(verb) else "unknown"
        if fault.where == "unknown":
            self._refuse(n, known, Err.UNKNOWN)
        elif not RANGE.fullmatch(fault.expected):
            self._refuse(n, known, Err.MALFORMED)
        elif verb == "hello" or verb in frames.STOPS:
            self._refuse(n, known, Err.RANGE)
        elif self.number is None or rest[1:2] != [f"{self.number:08X}"]:
            self._refuse(n, known, Err.SESSION)
        elif self._in_order(n, verb):
            self._answer(n, verb, Err.RANGE)

    # ---------------------------------------------------------------- greeting and stops

    def _greet(self, hello: frames.Hello) -> None:
        core, settings = self.core, self.core.eeprom.settings
        if hello.session == self.number and self._answered and hello.n == self._answered[0]:
            core.stream.send_lines(self._answered[1])
            return
        low, high = (settings["leasemin"], settings["leasemax"]) if settings else LEASE_MS
        if hello.version != PROTOCOL_VERSION:
            self._refuse(hello.n, "hello", Err.VERSION)
            return
        if not low <= hello.lease_ms <= high or not hello.session:
            self._refuse(hello.n, "hello", Err.RANGE)
            return
        core.lease.open(hello.lease_ms)
        if core.state not in (McuState.OFF, McuState.LOWERING):
            core.lower(LowerWhy.SESSION)
        self.number = hello.session
        self._staged = None
        core.stream.greet(hello.lease_ms)
        self._answer(hello.n, "hello", Done(f"{PROTOCOL_VERSION} {hello.lease_ms}"))
        self._next = 1
        core.event(EventKind.SESSION, hello.session)

    def _cut(self, n: int, rule: int) -> None:
        self.core.cut(CutWhy.HOST, number=n, cause=Cause.HOST_RULE if rule else Cause(0),
                      detail=min(rule, RULE_MAX))
        self.core.stream.send(b"ok %d cut" % n)

    # ---------------------------------------------------------------- numbered requests

    def _info(self, request: frames.Info) -> Result:
        core, config, kept = self.core, self.core.config, self.core.eeprom.kept
        settings = core.eeprom.settings
        pages = (
            f"fw={config.firmware} proto={PROTOCOL_VERSION}",
            f"signs={config.signs} vbits={config.v_bits} ibits={config.i_bits} dvbits={config.v_dac_bits} "
            f"dibits={config.i_dac_bits}",
            f"tick={config.tick_hz} sample={config.sample_ticks} skew={config.skew_ns} block={config.block_pairs} "
            f"queue={config.queue} before={config.before} after={config.after}",
            f"boot={kept.boots} reset={int(self.reset_cause)} causes={kept.causes:08X} rule={kept.rule} "
            f"tag={kept.tag:08X} mark={kept.mark} settings={settings.checksum if settings else 0:08X} "
            f"blank={int(settings is None)} arm={core.arms} event={core.stream.number} "
            f"now={core.wire_tick(core.now)} snap={core.snapshot.waiting} first={kept.first:08X} at={kept.tick} "
            f"v={kept.v_code} i={kept.i_code}")
        if request.page >= len(pages):
            return Err.RANGE
        return Done(str(request.page), pages[request.page])

    def _get(self, request: frames.Get) -> Result:
        settings = self.core.eeprom.settings
        if request.page >= PAGES:
            return Err.RANGE
        if settings is None:
            return Err.BLANK
        values = settings.values[request.page * PAGE : (request.page + 1) * PAGE]
        return Done(" ".join(map(str, (request.page, *values))))

    def _put(self, request: frames.Put) -> Result:
        setting = BY_KEY.get(request.key)
        if setting is None or not setting.low <= request.value <= setting.high:
            return Err.RANGE
        if self._staged is None:
            settings = self.core.eeprom.settings
            self._staged = dict(zip(KEYS, settings.values, strict=True)) if settings else {}
        self._staged[request.key] = request.value
        return Done()

    def _save(self, request: frames.Save) -> Result:
        core = self.core
        core.contacts.read()
        staged = self._staged or {}
        if set(staged) != set(KEYS) or checksum(tuple(staged[key] for key in KEYS)) != request.checksum:
            return Err.CHECKSUM
        try:
            settings = Settings.of(staged)
        except WireFault:
            return Err.RANGE
        if core.state is not McuState.OFF:
            return Err.STATE
        if core.seen & Inputs.INTERLOCK:
            return Err.CLOSED
        self._staged = None
        core.eeprom.write_settings(settings)
        core.adopt(settings)
        core.rules.configure()
        core.event(EventKind.SAVED, signed32(settings.checksum))
        return Done(f"{settings.checksum:08X}")

    def _arm(self, request: frames.Arm) -> Result:
        refusal = self.core.arming.request(request)
        return refusal if refusal is not None else Done(str(request.arm))

    def _segment(self, request: frames.Segment) -> Result:
        core = self.core
        if core.state not in LIVE or core.state is McuState.LOWERING:
            return Err.STATE
        if core.latched:
            return Err.LATCHED
        if not core.lease.running:
            return Err.LEASE
        refusal = core.reaction.check(request) or core.points.check(request)
        if refusal is not None:
            return refusal
        if core.state is McuState.PAUSING:
            core.reaction.resume()
        serial = core.points.add(request)
        return Done(f"{serial} {len(core.points.queue)}")

    def _reset(self, request: frames.Reset) -> Result:
        refusal = self.core.latch.reset(request)
        return refusal if refusal is not None else Done(f"{request.causes:08X}")

    def _again(self, request: frames.Again) -> Result:
        events = self.core.stream.since(request.event)
        if events is None:
            return Err.GONE
        return Done(str(len(events)), more=b"".join(seal(encode_answer(event)) for event in events))

    def _snap(self, request: frames.Snap) -> Result:
        part = self.core.snapshot.part(request.offset)
        return Done(part) if part is not None else Err.NOTHING

    def _stored(self, request: frames.Stored) -> Result:
        return Done() if self.core.snapshot.stored(request.snapshot) else Err.NOTHING
