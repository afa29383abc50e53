"""One client's requests: stops ahead of everything, the rest bounded (S7, S11)."""

import json
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.publish import jsonrpc
from hvhost.publish.conversation import Conversation, Later, Peer, TalkLimits
from hvhost.words.errors import CommandRefused


class Talk:
    """A conversation with what it called and what it sent."""

    def __init__(self, limits: TalkLimits | None = None, stops_only: bool = False) -> None:
        self.called: list[tuple[str, dict[str, Any]]] = []
        self.sent: list[dict[str, Any]] = []
        self.results: dict[str, Any] = {}
        self.machine = Conversation(Peer(number=1, uid=1000, pid=42, stops_only=stops_only), self._call,
                                    lambda line: self.sent.append(json.loads(line)), 0.0, limits)

    def _call(self, method: str, params: dict[str, Any], peer: Peer) -> Any:
        self.called.append((method, params))
        result = self.results.get(method, {"done": method})
        if isinstance(result, Exception):
            raise result
        return result

    @property
    def methods(self) -> list[str]:
        """Return the methods called, in order."""
        return [method for method, _ in self.called]


def ask(method: str, request_id: int | None = 1, **params: Any) -> bytes:
    """Return a request line."""
    identity = {} if request_id is None else {"id": request_id}
    return json.dumps({"jsonrpc": "2.0", "method": method, "params": params, **identity}).encode() + b"\n"


def test_a_request_is_carried_out_and_answered() -> None:
    """One line in, one call, one answer with its id."""
    talk = Talk()
    talk.machine.receive(ask("status", 7), 0.0)
    assert talk.methods == []
    assert talk.machine.turn() is False
    assert talk.sent == [{"jsonrpc": "2.0", "id": 7, "result": {"done": "status"}}]


@pytest.mark.parametrize("stop", ["cut", "lower"])
def test_a_stop_is_carried_out_while_its_bytes_are_taken(stop: str) -> None:
    """S7: a stop waits for no turn, and what its sender sent before it is not carried out after it."""
    talk = Talk()
    talk.machine.receive(ask("status", 1) + ask("arm", 2) + ask(stop, 3) + ask("seat", 4), 0.0)
    assert talk.methods == [stop]
    while talk.machine.turn():
        pass
    assert talk.methods == [stop, "seat"]
    overtaken = [one["id"] for one in talk.sent if one.get("error", {}).get("code") == jsonrpc.OVERTAKEN]
    assert overtaken == [1, 2]


def test_a_stop_overtakes_what_waits_from_earlier_reads() -> None:
    """An arm that waits for its turn is refused when a cut of the same client comes in."""
    talk = Talk()
    talk.machine.receive(ask("arm", 1), 0.0)
    talk.machine.receive(ask("cut", 2), 0.1)
    assert talk.machine.turn() is False
    assert talk.methods == ["cut"]
    assert talk.machine.waiting == 0


def test_a_client_over_its_rate_can_still_stop() -> None:
    """Requests above the rate are refused and told once a second; a cut among them goes through."""
    talk = Talk(TalkLimits(rate_hz=1.0, burst=2))
    talk.machine.receive(b"".join(ask("status", n) for n in range(50)) + ask("cut", 99), 0.0)
    assert talk.methods == ["cut"]
    assert talk.machine.refused == 48
    assert sum(one.get("error", {}).get("code") == jsonrpc.TOO_FAST for one in talk.sent) == 1
    talk.machine.receive(ask("status", 100), 2.0)
    talk.machine.turn()
    assert talk.methods == ["cut", "status"]


def test_a_burst_of_stops_is_one_stop() -> None:
    """A key that repeats does not make the daemon work once per repeat; every request is answered."""
    talk = Talk()
    talk.machine.receive(b"".join(ask("cut", n) for n in range(100)), 0.0)
    assert talk.methods == ["cut"]
    assert [one["id"] for one in talk.sent] == list(range(100))


def test_a_torn_line_does_not_swallow_the_stop_behind_it() -> None:
    """A client that died in mid-line and comes back with LF first is understood."""
    talk = Talk()
    talk.machine.receive(b'{"jsonrpc":"2.0","met' + b"\n" + ask("cut"), 0.0)
    assert talk.methods == ["cut"]


def test_a_line_without_end_is_dropped_and_the_next_one_read() -> None:
    """S11: bytes without a line feed are held up to a bound; the stop after them is obeyed."""
    talk = Talk()
    for _ in range(40):
        talk.machine.receive(b"x" * 10_000, 0.0)
    talk.machine.receive(b"xx\n" + ask("cut"), 0.0)
    assert talk.methods == ["cut"]
    assert talk.machine.refused >= 1
    assert len(talk.machine._buffer) == 0


def test_a_stops_only_client_gets_its_stops_and_nothing_else() -> None:
    """A connection beyond the limit of clients may stop."""
    talk = Talk(stops_only=True)
    talk.machine.receive(ask("status", 1) + ask("lower", 2), 0.0)
    while talk.machine.turn():
        pass
    assert talk.methods == ["lower"]
    assert talk.sent[0]["error"]["code"] == jsonrpc.STOPS_ONLY


def test_what_waits_is_bounded_and_taken_in_turns() -> None:
    """S11: a flood waits in a short queue, a few requests a turn, so that nobody else is kept waiting."""
    talk = Talk(TalkLimits(burst=1000, waiting=20, turn=8))
    talk.machine.receive(b"".join(ask("status", n) for n in range(200)), 0.0)
    assert talk.machine.waiting == 20
    assert talk.machine.turn() is True
    assert len(talk.called) == 8


def test_a_hopeless_client_is_named() -> None:
    """Endless refusals end in disconnection."""
    talk = Talk(TalkLimits(rate_hz=0.0, burst=1, refused_most=100))
    talk.machine.receive(ask("status") * 200, 0.0)
    assert talk.machine.hopeless


def test_errors_of_the_handler_are_answers() -> None:
    """A refusal keeps its parts; a fault of ours is told and counted; neither leaves the machine."""
    talk = Talk()
    talk.results = {"arm": CommandRefused("a press", "none"), "set": ZeroDivisionError("oops"), "odd": float("nan")}
    talk.machine.receive(ask("arm", 1) + ask("set", 2) + ask("odd", 3), 0.0)
    while talk.machine.turn():
        pass
    codes = [one["error"]["code"] for one in talk.sent]
    assert codes == [jsonrpc.REFUSED, jsonrpc.INTERNAL, jsonrpc.INTERNAL]
    assert talk.machine.faults == 2


def test_a_stop_that_raises_is_answered_too() -> None:
    """A fault in the stop path is told to whoever pressed, who then uses the emergency switching off."""
    talk = Talk()
    talk.results = {"cut": RuntimeError("no port")}
    talk.machine.receive(ask("cut", 5), 0.0)
    assert talk.sent[0]["error"]["code"] == jsonrpc.INTERNAL
    assert talk.sent[0]["id"] == 5


def test_a_notification_is_carried_out_and_not_answered() -> None:
    """JSON-RPC 2.0, section 4.1: no id, no answer."""
    talk = Talk()
    talk.machine.receive(ask("cut", None) + ask("status", None), 0.0)
    talk.machine.turn()
    assert talk.methods == ["cut", "status"]
    assert talk.sent == []


def test_an_answer_may_come_later() -> None:
    """A request that takes its time is answered when it is done, once, with result or error."""
    talk = Talk()
    first, second = Later(), Later()
    talk.results = {"run": first, "arm": second}
    talk.machine.receive(ask("run", 1) + ask("arm", 2), 0.0)
    talk.machine.turn()
    assert talk.sent == []
    second.fail(CommandRefused("a press"))
    first.finish("passed")
    first.finish("twice")
    assert [one["id"] for one in talk.sent] == [2, 1]
    assert talk.sent[1]["result"] == "passed"


def test_one_late_answer_may_serve_several_stops() -> None:
    """A burst of cuts whose confirmation comes later is answered one by one."""
    talk = Talk()
    later = Later()
    talk.results = {"cut": later}
    talk.machine.receive(ask("cut", 1) + ask("cut", 2), 0.0)
    later.finish("cut confirmed")
    assert [(one["id"], one["result"]) for one in talk.sent] == [(1, "cut confirmed"), (2, "cut confirmed")]
    later.when_done(lambda result, error: talk.sent.append({"result": result}))
    assert talk.sent[-1]["result"] == "cut confirmed"


def test_late_answers_are_bounded() -> None:
    """S11: a client cannot pile up unfinished requests."""
    talk = Talk(TalkLimits(later_most=2, turn=64))
    for n in range(5):
        talk.results = {"run": Later()}
        talk.machine.receive(ask("run", n), 0.0)
        talk.machine.turn()
    assert [one["error"]["code"] for one in talk.sent] == [jsonrpc.TOO_FAST] * 3


@given(st.lists(st.binary(max_size=40) | st.sampled_from([ask("cut"), ask("status"), b"\n", b'{"cut"']), max_size=12))
def test_any_bytes_end_in_calls_and_answers_only(chunks: list[bytes]) -> None:
    """S11: whatever comes in, nothing is raised, and a cut on a line of its own is always carried out."""
    talk = Talk()
    for chunk in chunks:
        talk.machine.receive(chunk, 0.0)
    before = talk.methods.count("cut")
    talk.machine.receive(b"\n" + ask("cut"), 0.0)
    assert talk.methods.count("cut") == before + 1
    assert talk.methods[-1] == "cut"
    while talk.machine.turn():
        pass
