"""The host's end of the line as a whole: greeting, requests, renewals, stops, silence, restarts."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.wire.frames import (
    Again,
    ArcSeen,
    Arm,
    Cut,
    Hello,
    Info,
    Lower,
    Ok,
    Refusal,
    Renew,
    Segment,
    decode_request,
)
from hvhost.wire.lines import Garbled, LineReader, seal
from hvhost.wire.link import (
    HELLO_TRIES,
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
    Link,
    LinkState,
    Silent,
    StopAnswered,
)
from hvhost.wire.requests import ANSWER_S
from hvhost.wire.vocabulary import HostRule
from hvhost.words.errors import CommandRefused
from tests.wire.device import Device, block, block_line, greet, greeted, say

SEGMENT = Segment(v=100, i=200, ticks=1000)
ARM = Arm(arm=1, tag=2, settings=3, event=4)
S = 0xC0FFEE01


def heard(data: bytes) -> list[object]:
    """Return the requests in what the link sent."""
    return [decode_request(body) for body in LineReader().feed(data) if isinstance(body, bytes)]


def ended(events: list[object]) -> Ended:
    """Return the one `Ended` among these events."""
    (one,) = [event for event in events if isinstance(event, Ended)]
    return one


# ---------------------------------------------------------------- greeting


def test_the_link_greets_by_itself() -> None:
    """Hello, four information pages and the settings, one outstanding, numbered from 1 after hello."""
    device = Device()
    link = Link(0.0, session=S, lease_ms=500)
    events = greet(link, device)
    assert [type(event) for event in events] == [Greeted]
    assert link.state is LinkState.GREETED
    assert link.greeting is not None
    assert link.greeting.settings == device.settings
    first, *rest = device.heard
    assert first == Hello(n=S | 1 << 31, session=S, version=1, lease_ms=500)
    assert [frame.n for frame in rest] == list(range(1, 10))  # type: ignore[union-attr]


def test_a_lost_line_of_the_greeting_is_repeated() -> None:
    """Each request's first line lost: the greeting still completes, with the same numbers."""
    device, link = Device(), Link(0.0, session=S, lease_ms=500)
    now, events = 0.0, []
    for _ in range(40):
        if out := link.take_output(now):
            now += ANSWER_S
            again = link.take_output(now)
            assert again == out
            events += link.receive(device.answer(again), now)
    assert any(isinstance(event, Greeted) for event in events)


def test_no_answer_ends_the_greeting_after_some_tries() -> None:
    """Silence is told once, after a bounded number of hellos."""
    link, sent, events = Link(0.0, session=S, lease_ms=500), 0, []
    for k in range(40):
        sent += bool(link.take_output(k * ANSWER_S))
        events += link.timer(k * ANSWER_S)
    assert sent == HELLO_TRIES
    assert ended(events).why is EndWhy.SILENT
    assert link.deadline() is None


def test_another_device_is_told_from_silence() -> None:
    """A device that prints something else is not ours."""
    link, events = Link(0.0, session=S, lease_ms=500), []
    for k in range(40):
        link.take_output(k * ANSWER_S)
        events += link.receive(b"$GPGGA,1,2,3*47\r\n", k * ANSWER_S)
        events += link.timer(k * ANSWER_S)
    assert ended(events).why is EndWhy.NOT_OURS


@pytest.mark.parametrize(("answer", "why"), [
    ("err {n} hello version", EndWhy.VERSION), ("ok {n} hello 2 500", EndWhy.VERSION),
    ("err {n} hello range", EndWhy.REFUSED), ("ok {n} hello 1 499", EndWhy.MALFORMED)])
def test_a_bad_answer_to_hello_ends_the_link(answer: str, why: EndWhy) -> None:
    """The reason is told, and nothing more is asked."""
    link = Link(0.0, session=S, lease_ms=500)
    link.take_output(0.0)
    assert ended(link.receive(say(answer.format(n=S | 1 << 31)), 0.0)).why is why
    assert link.take_output(1.0) == b""
    with pytest.raises(CommandRefused, match="relink"):
        link.request(Info(page=0))


def test_the_answer_to_an_older_session_is_not_taken() -> None:
    """A hello's answer left in the line by the host that ran before does not open this session."""
    link = Link(0.0, session=S, lease_ms=500)
    link.take_output(0.0)
    assert [type(e) for e in link.receive(say(f"ok {0xFEEDF00D} hello 1 500"), 0.0)] == [Fault]
    assert link.take_output(0.0) == b""


def test_blocks_before_the_greeting_are_counted_not_passed() -> None:
    """Without the coding no block can be read; their number is told."""
    link = Link(0.0, session=S, lease_ms=500)
    assert link.receive(block_line(block(1)) * 3, 0.0) == []
    assert link.counters["blocks_before_greeting"] == 3


def test_untrusted_settings_are_a_fault_and_a_greeting_without_settings() -> None:
    """A wrong checksum leaves a link that can observe and stop."""
    link = Link(0.0, session=S, lease_ms=500)
    events = greet(link, Device(fields={"settings": "00000001"}))
    assert [type(event) for event in events] == [Fault, Greeted]
    assert link.greeting is not None
    assert link.greeting.settings is None


# ---------------------------------------------------------------- requests


def test_requests_come_back_answered_in_order() -> None:
    """Each ticket returns once, with its request and answer."""
    link = greeted()
    tickets = [link.request(Info(page=3)), link.request(Again(event=1))]
    assert link.waiting_requests == 2
    (first,) = heard(link.take_output(0.0))
    assert link.waiting_requests == 2
    assert first == Info(n=10, session=S, page=3)
    (answered,) = link.receive(say("ok 10 info 3 x=1"), 0.0)
    assert isinstance(answered, Answered)
    assert answered.ticket == tickets[0]
    assert link.waiting_requests == 1
    (second,) = heard(link.take_output(0.0))
    assert second == Again(n=11, session=S, event=1)
    (refused,) = link.receive(say("err 11 again gone"), 0.0)
    assert refused == Answered(tickets[1], Again(event=1), Refusal(n=11, verb="again", code="gone"))


def test_an_unanswered_request_is_given_up() -> None:
    """After its tries it is dropped as sent."""
    link = greeted()
    ticket = link.request(SEGMENT)
    events = []
    for k in range(8):
        link.take_output(k * ANSWER_S)
        events += link.receive(block_line(block(k)), k * ANSWER_S)
        events += link.timer(k * ANSWER_S)
    assert Dropped(ticket, SEGMENT, DropWhy.UNANSWERED, True) in events


def test_fields_out_of_range_never_leave() -> None:
    """What the grammar cannot carry is the caller's mistake and is refused at once."""
    link = greeted()
    for frame in (Segment(v=65536, i=0, ticks=1), Segment(v=-1, i=0, ticks=1),
                  Arm(arm=1, tag=1 << 32, settings=0, event=0), Arm(arm=1, tag=1, settings=0, event=0,
                                                                    tighter={"colour": 1})):
        with pytest.raises(CommandRefused):
            link.request(frame)
    with pytest.raises(CommandRefused, match="new link"):
        link.request(Hello(version=1, lease_ms=500))
    assert link.waiting_requests == 0


def test_an_answer_nobody_asked_for_is_a_fault() -> None:
    """The device said the impossible: told, and nothing else happens."""
    link = greeted()
    assert [type(event) for event in link.receive(say("ok 77 arm 1"), 0.0)] == [Fault]
    assert [type(event) for event in link.receive(say("hm 77 arm 1"), 0.0)] == [Fault]
    assert [type(event) for event in link.receive(say("b 1 2 3"), 0.0)] == [Fault]
    assert link.state is LinkState.GREETED


# ---------------------------------------------------------------- renewals


def test_a_renewal_leaves_at_most_every_eighth_of_the_lease() -> None:
    """The first at once, the next after 62.5 ms, each with the index that was judged."""
    link = greeted()
    assert link.renew((1 << 32) + 31, 0.0)
    assert heard(link.take_output(0.0)) == [Renew(session=S, index=31)]
    assert not link.renew(63, 0.062)
    assert link.renew(95, 0.063)
    assert heard(link.take_output(0.063)) == [Renew(session=S, index=95)]
    assert link.take_output(0.07) == b""


def test_no_renewal_from_the_decision_to_cut_until_it_is_confirmed() -> None:
    """Not even one that waits to be written; after the confirmation they go on."""
    link = greeted()
    assert link.renew(31, 0.0)
    number = link.cut(0, 0.0)
    assert heard(link.take_output(0.0)) == [Cut(n=number, rule=0)]
    assert not link.renew(63, 0.1)
    assert [type(e) for e in link.receive(say(f"ok {number} cut"), 0.1)] == [StopAnswered]
    assert link.cut_state is CutState.ANSWERED
    assert not link.renew(95, 0.2)
    events = link.receive(block_line(block(100)) + block_line(block(104)), 0.3)
    assert [type(e) for e in events] == [BlockIn, BlockIn, CutConfirmed]
    assert link.stop_confirmed
    assert link.renew(107, 0.3)


def test_a_lower_does_not_pause_the_renewals() -> None:
    """Every rule stays live while lowering, the lease too."""
    link = greeted()
    link.lower(0.0)
    assert link.renew(31, 0.0)
    assert [type(frame) for frame in heard(link.take_output(0.0))] == [Lower, Renew]


def test_time_alone_renews_nothing() -> None:
    """However long timers run, no renewal leaves without `renew`."""
    link = greeted()
    out = b""
    for k in range(200):
        link.timer(k * 0.01)
        link.receive(block_line(block(k)), k * 0.01)
        out += link.take_output(k * 0.01)
    assert out == b""


# ---------------------------------------------------------------- stops


@pytest.mark.parametrize("stop", ["cut", "lower", "arc"])
def test_a_stop_drops_arms_and_segments_for_good(stop: str) -> None:
    """Unsent and unanswered ones come back as dropped and never leave again; other requests stay."""
    link = greeted()
    tickets = [link.request(frame) for frame in (SEGMENT, ARM, Again(event=1), SEGMENT)]
    link.take_output(0.0)
    number = {"cut": link.cut, "arc": link.arc}[stop](77, 0.1) if stop != "lower" else link.lower(0.1)
    out = link.take_output(0.1)
    assert out.startswith(b"\n")
    stop_frame, again = heard(out)
    assert stop_frame == {"cut": Cut(n=number, rule=77), "lower": Lower(n=number, session=S),
                          "arc": ArcSeen(n=number, session=S, index=77)}[stop]
    assert isinstance(again, Again)
    events = link.timer(0.1)
    assert [(e.ticket, e.sent, e.why) for e in events if isinstance(e, Dropped)] == [
        (tickets[0], True, DropWhy.STOP), (tickets[1], False, DropWhy.STOP), (tickets[3], False, DropWhy.STOP)]
    later = b"".join(link.take_output(0.1 + 0.01 * k) for k in range(1, 100))
    assert not any(isinstance(frame, Arm | Segment) for frame in heard(later))
    assert link.receive(say("ok 10 seg 1 1"), 0.2) == []  # the late answer of what was dropped


def test_arms_and_segments_are_refused_while_a_stop_is_under_way() -> None:
    """Until the lower is answered, or the cut confirmed, none is taken."""
    link = greeted()
    link.lower(0.0)
    with pytest.raises(CommandRefused, match="stop"):
        link.request(SEGMENT)
    link.receive(say("ok 1 lower"), 0.0)
    link.request(SEGMENT)
    link.cut(0, 0.0)
    link.receive(say("ok 2 cut"), 0.0)
    with pytest.raises(CommandRefused, match="confirmed"):
        link.request(ARM)
    assert link.request(Info(page=3))


@pytest.mark.parametrize("verb", ["lower", "arc"])
def test_an_unanswered_lower_or_arc_becomes_a_cut(verb: str) -> None:
    """At 100 ms a cut for 'unconfirmed' leaves; a refusal is followed by it at once."""
    link = greeted()
    number = link.lower(0.0) if verb == "lower" else link.arc(5, 0.0)
    link.take_output(0.0)
    assert link.timer(0.099) == []
    (event,) = link.timer(0.1)
    assert event == Escalated(verb, number, number + 1)
    assert heard(link.take_output(0.1))[0] == Cut(n=number + 1, rule=HostRule.UNCONFIRMED)
    link = greeted()
    number = link.lower(0.0) if verb == "lower" else link.arc(5, 0.0)
    events = link.receive(say(f"err {number} {verb} state"), 0.01)
    assert [type(e) for e in events] == [StopAnswered, Escalated]
    assert heard(link.take_output(0.01))[0] == Cut(n=number + 1, rule=HostRule.UNCONFIRMED)


def test_before_the_greeting_every_stop_is_a_cut_and_leaves_first() -> None:
    """A cut needs no session; lower and arc, which need one, become cuts."""
    for act in (lambda link: link.cut(0, 0.0), lambda link: link.lower(0.0), lambda link: link.arc(1, 0.0)):
        link = Link(0.0, session=S, lease_ms=500, first_stop=40)
        assert act(link) == 40
        first, second = heard(link.take_output(0.0))
        assert isinstance(first, Cut)
        assert isinstance(second, Hello)


def test_a_cut_leaves_an_ended_link() -> None:
    """After the session's end nothing leaves but a cut, repeated until answered."""
    link = greeted()
    link.request(SEGMENT)
    assert ended(link.receive(say("ev 9 1 boot 4 99"), 0.0)).why is EndWhy.REBOOTED
    assert link.take_output(0.0) == b""
    link.cut(0, 0.1)
    assert heard(link.take_output(0.1)) == heard(link.take_output(0.12)) == [Cut(n=1, rule=0)]
    assert link.next_stop == 2
    link.receive(say("ok 1 cut"), 0.13)
    assert link.take_output(1.0) == b""


def test_a_stop_overtakes_what_the_port_did_not_take() -> None:
    """The rest of a half-written line is thrown away for a stop, which begins with LF."""
    link = greeted()
    link.request(SEGMENT)
    out = link.take_output(0.0)
    link.unsent(out[5:])
    link.cut(0, 0.01)
    after = link.take_output(0.01)
    assert after == b"\n" + seal(b"cut 1 0")
    got = LineReader().feed(out[:5] + after)
    assert isinstance(got[0], Garbled)
    assert got[1] == b"cut 1 0"


def test_what_the_port_did_not_take_goes_on_where_no_stop_comes() -> None:
    """The rest leaves before anything new, and no renewal piles up behind it."""
    link = greeted()
    link.request(Info(page=0))
    out = link.take_output(0.0)
    link.unsent(out[5:])
    assert not link.renew(31, 0.01)
    assert link.take_output(0.01) == out[5:]
    assert link.renew(31, 0.02)


# ---------------------------------------------------------------- time


def test_after_a_stall_no_stale_set_point_leaves() -> None:
    """Arms and segments that waited through a stall longer than the lease are dropped, with half-sent lines."""
    link = greeted()
    link.request(Info(page=0))
    link.unsent(link.take_output(0.0)[9:])
    ticket = link.request(SEGMENT)
    out = link.take_output(5.0)
    assert out.startswith(b"\n")
    assert not any(isinstance(frame, Segment) for frame in heard(out))
    assert Dropped(ticket, SEGMENT, DropWhy.STALL, False) in link.timer(5.0)


def test_an_unanswered_segment_is_not_repeated_after_a_stall() -> None:
    """Nor one that had left before the stall."""
    link = greeted()
    ticket = link.request(SEGMENT)
    assert link.take_output(0.0)
    assert link.take_output(5.0) == b""
    assert Dropped(ticket, SEGMENT, DropWhy.STALL, True) in link.receive(b"", 5.0)


def test_silence_is_told_once_until_the_next_good_line() -> None:
    """No good line for one lease: told; garbage does not count; the next good line ends it."""
    link = greeted()
    assert link.deadline() == 0.5
    assert link.timer(0.4) == []
    assert [type(e) for e in link.receive(b"noise\n", 0.45)] == [GarbledIn]
    assert link.timer(0.5) == [Silent(0.5)]
    assert link.timer(0.7) == []
    assert link.deadline() is None
    link.receive(block_line(block(1)), 0.8)
    assert link.timer(1.2) == []
    assert [type(e) for e in link.timer(1.31)] == [Silent]


def test_the_deadline_follows_the_stops() -> None:
    """A waiting stop wakes the caller every 20 ms; something to write wakes it now."""
    link = greeted()
    link.cut(0, 0.1)
    assert link.deadline() == 0.1
    link.take_output(0.1)
    assert link.deadline() == pytest.approx(0.12)


# ---------------------------------------------------------------- another session, another boot


def test_a_restart_of_the_mcu_ends_the_session() -> None:
    """Told by the boot event with another counter, and by 'session' in answer to a request; tickets come back."""
    link = greeted()
    ticket = link.request(SEGMENT)
    events = link.receive(say("ev 1 5 boot 4 5"), 0.0)
    assert [type(e) for e in events] == [EventIn, Dropped, Ended]
    assert ended(events).why is EndWhy.REBOOTED
    link = greeted()
    ticket = link.request(Info(page=0))
    link.take_output(0.0)
    events = link.receive(say("err 10 info session"), 0.0)
    assert [type(e) for e in events] == [Answered, Ended]
    assert events[0].ticket == ticket  # type: ignore[union-attr]
    assert ended(events).why is EndWhy.SESSION


def test_events_asked_for_again_end_nothing() -> None:
    """The boot and session events of this boot, repeated, are history."""
    link = greeted()
    events = link.receive(say("ev 1 5 boot 1 4") + say("ev 2 6 session 17 0"), 0.0)
    assert [type(e) for e in events] == [EventIn, EventIn]
    assert link.state is LinkState.GREETED
    assert ended(link.receive(say("ev 4 7 session 17 0"), 0.0)).why is EndWhy.SESSION


def test_numbers_out_of_step_end_the_session() -> None:
    """A request refused as out of step, where nothing was lost, ends the session."""
    link = greeted()
    link.request(Info(page=0))
    link.take_output(0.0)
    assert ended(link.receive(say("err 10 info number"), 0.0)).why is EndWhy.NUMBER


def test_blocks_of_an_ended_link_are_still_passed_on() -> None:
    """Observing goes on, so that nothing is lost to the record."""
    link = greeted()
    link.receive(say("ev 9 1 boot 4 99"), 0.0)
    assert [type(e) for e in link.receive(block_line(block(5)), 0.1)] == [BlockIn]
    assert not link.renew(8, 0.1)


# ---------------------------------------------------------------- any bytes

lines = st.one_of(
    st.binary(max_size=40),
    st.sampled_from([block_line(block(k)) for k in range(3)]),
    st.sampled_from([say(body) for body in (
        "ok 10 info 0 a=1", "ok 1 cut", "err 1 lower state", "ev 4 9 cut 1 1", "ev 5 9 boot 4 9", "ev 6 9 session 7 0",
        "ok 10 seg 1 1", "err 10 seg number", "x", "b 1 2", "ok 2 arc 0", "err 10 seg session")]),
    st.text(st.characters(min_codepoint=0x20, max_codepoint=0x7E), min_size=1, max_size=60).map(say))


def busy() -> Link:
    """Return a greeted link with a request outstanding and every stop waiting."""
    link = greeted()
    link.request(SEGMENT)
    link.take_output(0.0)
    link.lower(0.0)
    link.arc(3, 0.0)
    link.timer(0.0)
    return link


@given(st.lists(lines, max_size=12), st.data())
def test_any_bytes_yield_events_only(parts: list[bytes], data: st.DataObject) -> None:
    """Whole, byte by byte and in parts: the same events, the same state, no exception, and a cut still leaves."""
    stream = b"".join(parts)
    whole, single, split = busy(), busy(), busy()
    events = whole.receive(stream, 0.01)
    assert [e for k in range(len(stream)) for e in single.receive(stream[k : k + 1], 0.01)] == events
    cuts = sorted(data.draw(st.lists(st.integers(0, len(stream)), max_size=4)))
    pieces = [stream[a:b] for a, b in zip([0, *cuts], [*cuts, len(stream)], strict=True)]
    assert [e for piece in pieces for e in split.receive(piece, 0.01)] == events
    assert single.state is split.state is whole.state
    assert single.take_output(0.02) == whole.take_output(0.02)
    number = whole.cut(HostRule.STALE, 0.5)
    assert b"\n" + seal(f"cut {number} 12".encode()) in whole.take_output(0.5) or number == 3


@given(st.binary(min_size=1, max_size=200), st.sampled_from(("greeting", "greeted")))
def test_any_bytes_in_any_state(noise: bytes, state: str) -> None:
    """Noise in front of a good line, before and after the greeting, costs at most the line it runs into."""
    link = greeted() if state == "greeted" else Link(0.0, session=S, lease_ms=500)
    link.receive(noise, 0.0)
    link.receive(b"\n", 0.0)
    assert isinstance(link.receive(say("ev 9 1 inputs 1 1"), 0.0)[0], EventIn)


def test_a_session_number_is_checked() -> None:
    """0 and more than 32 bits are refused."""
    for session in (0, 1 << 32, -1):
        with pytest.raises(CommandRefused):
            Link(0.0, session=session, lease_ms=500)


def test_ok_words_reach_the_caller_untouched() -> None:
    """A snapshot's answer with its base64 arrives as it was sent."""
    link = greeted()
    ticket = link.request(Info(page=0))
    link.take_output(0.0)
    (event,) = link.receive(say("ok 10 info arc 0000002A 0 64 1 Zm9vYg=="), 0.0)
    assert event == Answered(ticket, Info(page=0),
                             Ok(n=10, verb="info", words=("arc", "0000002A", "0", "64", "1", "Zm9vYg==")))


def test_a_link_goes_on_from_its_numbers() -> None:
    """A link resumed from the numbers of another one sends what that one would have sent."""
    link = greeted()
    link.request(Info(page=0))
    link.take_output(0.0)
    link.receive(say("ok 10 info 0 a=1"), 0.0)
    assert link.renew(31, 0.0)
    link.cut(0, 0.0)
    link.receive(say("ok 1 cut"), 0.0)
    assert link.greeting is not None
    twin = Link.resumed(0.0, link.greeting, link.numbers())
    assert not twin.renew(63, 0.06)
    assert twin.numbers() == link.numbers()
    link.receive(block_line(block(100)) * 2, 0.0)  # the twin has no cut to confirm
    for one in (link, twin):
        one.request(Again(event=1))
        one.cut(3, 0.2)
    assert twin.take_output(0.2) == link.take_output(0.2)
