"""One client's requests: bytes in, calls and answers out, with stops ahead of everything (S7, S11).

The machine is synchronous and owns no socket.  A stop (``lower``, ``cut``) is carried out while its bytes are being
taken, before anything that waits, whatever the client's rate; requests of the same client that stand before it and
were not carried out yet are refused as overtaken, since an arm that its sender sent before a cut must not follow it.
Everything else goes through a bounded queue and a token bucket.
"""

from collections import deque
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

from hvhost.publish import jsonrpc
from hvhost.publish.jsonrpc import Request, RpcFault
from hvhost.words.errors import HvhostError

STOPS = frozenset(("lower", "cut"))
_STOP_MARKS = (b'"cut"', b'"lower"')  # what a line must hold to be looked at while a client is over its rate


@dataclass(frozen=True, slots=True, kw_only=True)
class Peer:
    """Who is at the other end, by the kernel's word; ``number`` tells connections apart."""

    number: int
    uid: int = -1
    pid: int = -1
    stops_only: bool = False

    @property
    def text(self) -> str:
        """Words for the record."""
        return f"client {self.number} (pid {self.pid}, uid {self.uid})"


@dataclass(frozen=True, slots=True, kw_only=True)
class TalkLimits:
    """What one client may ask: requests per second with a burst, requests waiting, requests carried out per turn."""

    rate_hz: float = 50.0
    burst: int = 100
    waiting: int = 64
    turn: int = 8
    refused_most: int = 20_000
    later_most: int = 16


class Later:
    """An answer that is not known yet: whoever carries out the request calls ``finish`` or ``fail`` once."""

    def __init__(self) -> None:
        self._done: list[Callable[[Any, HvhostError | None], None]] = []
        self._outcome: tuple[Any, HvhostError | None] | None = None

    def finish(self, result: Any) -> None:
        """Answer with a plain value."""
        self._settle(result, None)

    def fail(self, error: HvhostError) -> None:
        """Answer with an error of ours."""
        self._settle(None, error)

    def when_done(self, done: Callable[[Any, HvhostError | None], None]) -> None:
        """Call ``done(result, error)`` once, at once where it is settled."""
        if self._outcome is not None:
            done(*self._outcome)
        else:
            self._done.append(done)

    def _settle(self, result: Any, error: HvhostError | None) -> None:
        if self._outcome is None:
            self._outcome = (result, error)
            for done in self._done:
                done(result, error)
            self._done.clear()


Call = Callable[[str, dict[str, Any], Peer], Any]


class Conversation:
    """``receive`` takes bytes and carries out what may be; ``turn`` goes on with what waits.

    ``send`` gets answer lines and never blocks.  ``hopeless`` says that the client earned its disconnection.
    """

    def __init__(self, peer: Peer, call: Call, send: Callable[[bytes], None], now_s: float,
                 limits: TalkLimits | None = None) -> None:
        self.peer, self._call, self._send = peer, call, send
        self.limits = limits or TalkLimits()
        self._buffer = bytearray()
        self._skipping = False
        self._waiting: deque[bytes] = deque()
        self._tokens, self._filled_s = float(self.limits.burst), now_s
        self._told_s = float("-inf")
        self._later = 0
        self.refused = self.faults = 0

    @property
    def waiting(self) -> int:
        """Requests taken and not yet carried out."""
        return len(self._waiting)

    @property
    def hopeless(self) -> bool:
        """More was refused than any honest client sends by mistake."""
        return self.refused > self.limits.refused_most

    def receive(self, data: bytes, now_s: float) -> None:
        """Take bytes: stops are carried out here and now, the rest is queued."""
        self._buffer += data
        if b"\n" in data:
            *lines, rest = bytes(self._buffer).split(b"\n")
            self._buffer = bytearray(rest)
            if self._skipping:
                self._skipping = False
                del lines[0]
            self._take(lines, now_s)
        if len(self._buffer) > jsonrpc.LINE_LIMIT:
            if not self._skipping:
                too_long = f"expected at most {jsonrpc.LINE_LIMIT} bytes a line"
                self._refuse(RpcFault(jsonrpc.PARSE_ERROR, too_long), now_s)
            self._buffer.clear()
            self._skipping = True

    def turn(self) -> bool:
        """Carry out some of what waits; return whether more waits."""
        for _ in range(min(self.limits.turn, len(self._waiting))):
            line = self._waiting.popleft()
            try:
                request = jsonrpc.parse_request(line)
            except RpcFault as fault:
                self.refused += 1
                self._send(jsonrpc.error_line(fault))
            else:
                self._answer(request, self._outcome(request))
        return bool(self._waiting)

    def _take(self, lines: list[bytes], now_s: float) -> None:
        done: dict[str, Any] = {}  # a burst of stops is one stop: each is answered with the first one's outcome
        for line in lines:
            if not line.strip():
                continue
            stop = self._stop_in(line)
            if stop is not None:
                self._overtake(stop.method)
                key = f"{stop.method}{stop.params}"
                if key not in done:
                    done[key] = self._outcome(stop)
                self._answer(stop, done[key])
            else:
                self._queue(line, now_s)

    def _stop_in(self, line: bytes) -> Request | None:
        if not any(mark in line for mark in _STOP_MARKS):
            return None
        try:
            request = jsonrpc.parse_request(line)
        except RpcFault:
            return None  # it is refused in its turn, with its reason
        return request if request.method in STOPS else None

    def _overtake(self, stop: str) -> None:
        while self._waiting:
            try:
                request_id = jsonrpc.parse_request(self._waiting.popleft()).request_id
            except RpcFault as fault:
                request_id = fault.request_id
            self._send(jsonrpc.error_line(RpcFault(
                jsonrpc.OVERTAKEN, f"not carried out: overtaken by {stop}", request_id=request_id)))

    def _queue(self, line: bytes, now_s: float) -> None:
        if self.peer.stops_only:
            self._refuse(RpcFault(jsonrpc.STOPS_ONLY, "too many clients: this connection takes lower and cut only"),
                         now_s)
        elif not self._token(now_s) or len(self._waiting) >= self.limits.waiting:
            self._refuse(RpcFault(jsonrpc.TOO_FAST, f"expected at most {self.limits.rate_hz:g} requests a second; "
                                                    "lower and cut are taken at any rate"), now_s)
        else:
            self._waiting.append(line)

    def _token(self, now_s: float) -> bool:
        self._tokens = min(self.limits.burst, self._tokens + (now_s - self._filled_s) * self.limits.rate_hz)
        self._filled_s = now_s
        if self._tokens < 1.0:
            return False
        self._tokens -= 1.0
        return True

    def _refuse(self, fault: RpcFault, now_s: float) -> None:
        """Count, and tell at most once a second: an answer to each would be a flood of our own."""
        self.refused += 1
        if now_s - self._told_s >= 1.0:
            self._told_s = now_s
            self._send(jsonrpc.error_line(fault))

    def _outcome(self, request: Request) -> Any:
        """Return the result, a Later, or the RpcFault to answer with; no error of a handler leaves here."""
        try:
            return self._call(request.method, request.params, self.peer)
        except RpcFault as fault:
            return fault
        except HvhostError as error:
            return jsonrpc.fault_of(error)
        except Exception as error:
            self.faults += 1
            return RpcFault(jsonrpc.INTERNAL, f"a fault of ours in {request.method}: {type(error).__name__}: "
                                              f"{str(error)[:200]}")

    def _answer(self, request: Request, outcome: Any) -> None:
        if isinstance(outcome, Later):
            self._answer_later(request, outcome)
        elif isinstance(outcome, RpcFault):
            fault = RpcFault(outcome.code, outcome.message, outcome.data, request.request_id)
            if request.request_id is not None:
                self._send(jsonrpc.error_line(fault))
        elif request.request_id is not None:
            try:
                line = jsonrpc.result_line(request.request_id, outcome)
            except (ValueError, TypeError) as error:
                self.faults += 1
                line = jsonrpc.error_line(RpcFault(jsonrpc.INTERNAL, f"the answer is no JSON: {error}",
                                                   request_id=request.request_id))
            self._send(line)

    def _answer_later(self, request: Request, later: Later) -> None:
        if self._later >= self.limits.later_most and request.method not in STOPS:
            self._answer(request, RpcFault(jsonrpc.TOO_FAST, "too many requests wait for their answer"))
            return
        self._later += 1

        def done(result: Any, error: HvhostError | None) -> None:
            self._later -= 1
            self._answer(request, jsonrpc.fault_of(error) if error is not None else result)

        later.when_done(done)
