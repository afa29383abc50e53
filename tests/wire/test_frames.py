"""Typed frames: every verb both ways, and what is refused."""

import contextlib
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.wire import fields, frames
from hvhost.wire.frames import (
    REQUESTS,
    Arm,
    McuEvent,
    Ok,
    Refusal,
    Segment,
    decode_received,
    decode_request,
    encode_answer,
    encode_request,
)
from hvhost.wire.settings import TIGHTENABLE
from hvhost.words.errors import WireFault

u32 = st.integers(0, 0xFFFFFFFF)
WORDS = st.text("abcdefghijklmnopqrstuvwxyz", min_size=1, max_size=9)
VALUES: dict[int, st.SearchStrategy[Any]] = {
    id(fields.NUMBER): u32, id(fields.HEX8): u32, id(fields.CODE): st.integers(0, 65535),
    id(fields.FLAG): st.integers(0, 1), id(fields.WORD): WORDS,
}


@st.composite
def requests(draw: st.DrawFn) -> frames.Request:
    """Any request of the table with any fields in range."""
    verb = draw(st.sampled_from(sorted(REQUESTS)))
    spec = REQUESTS[verb]
    drawn = {name: draw(VALUES.get(id(kind), st.integers(-fields.U32, fields.U32))) for name, kind in spec.fields}
    if verb == "arm":
        drawn["pause"] = draw(st.none() | st.tuples(u32, u32, u32))
        drawn["tighter"] = draw(st.dictionaries(st.sampled_from(TIGHTENABLE), u32, max_size=4))
    if verb == "seg":
        drawn["arc"] = draw(st.none() | u32)
    return spec.frame(**drawn)  # type: ignore[no-any-return]


@given(requests())
def test_a_request_comes_back(frame: frames.Request) -> None:
    """Encoding and decoding return the request; options that are not known are skipped."""
    body = encode_request(frame)
    assert decode_request(body) == frame
    assert decode_request(body + b" zzz=1") == frame


word = WORDS
i32 = st.integers(-0x80000000, 0x7FFFFFFF)
received = st.one_of(
    st.builds(Ok, n=u32, verb=word, words=st.lists(word, max_size=4).map(tuple),
              pairs=st.dictionaries(word, word, max_size=3)),
    st.builds(Refusal, n=u32, verb=word, code=word),
    st.builds(McuEvent, number=u32, tick=u32, kind=word, a=i32, b=i32))


@given(received)
def test_an_answer_or_event_comes_back(frame: Ok | Refusal | McuEvent) -> None:
    """Encoding and decoding return the answer or event."""
    assert decode_received(encode_answer(frame), "ss") == frame


@given(st.text(st.characters(min_codepoint=0x20, max_codepoint=0x7E), max_size=80).map(str.encode))
def test_any_printable_body_is_a_frame_or_a_fault(body: bytes) -> None:
    """Reading raises `WireFault` or returns a frame, on either side; nothing else is ever raised."""
    for read in (decode_request, lambda b: decode_received(b, "uu")):
        with contextlib.suppress(WireFault):
            read(body)


@pytest.mark.parametrize("body", [
    "", "fly 1 C0FFEE01", "cut", "cut 1", "cut 1 0 0", "cut 01 0", "cut +1 0", "cut -1 0", "cut 1 -0", "cut  1 0",
    "cut 1 0 ", " cut 1 0", "cut 1 4294967296", "cut 1 0x1", "cut 1 1e3", "cut 1 1_0", "lower 1 c0ffee01",
    "lower 1 C0FFEE1", "seg 1 C0FFEE01 65536 0 1", "seg 1 C0FFEE01 1 0 1 arc", "seg 1 C0FFEE01 arc=1 1 0 1",
    "seg 1 C0FFEE01 1 0 1 arc=1 arc=2", "seg 1 C0FFEE01 1 0 1 arc=", "seg 1 C0FFEE01 1 0 1 =1",
    "reset 1 C0FFEE01 00000001 2", "arm 1 C0FFEE01 1 00000001 00000002 3 pause=1,2",
    "arm 1 C0FFEE01 1 00000001 00000002 3 pause=1,2,x", "arm 1 C0FFEE01 1 00000001 00000002 3 oc=-1",
    "put 1 C0FFEE01 Vmax 3", "put 1 C0FFEE01 7 3", "CUT 1 0",
])
def test_a_malformed_request_is_refused(body: str) -> None:
    """Each breach of the grammar is a fault."""
    with pytest.raises(WireFault):
        decode_request(body.encode("ascii"))


@pytest.mark.parametrize("body", [
    "ok", "ok 1", "ok x get", "ok 1 Get", "err 1 get", "err 1 get state more", "ev 1 2 cut 3", "ev 1 2 cut 3 4 5",
    "ev 1 2 cut 3 2147483648", "ev -1 2 cut 3 4", "b 1", "hm 1 2", "ok 1 get a=1 b",
])
def test_a_malformed_answer_is_refused(body: str) -> None:
    """Each breach of the grammar by the device is a fault."""
    with pytest.raises(WireFault):
        decode_received(body.encode("ascii"), "ss")


def test_optional_fields_are_written_only_where_given() -> None:
    """An arm without reaction and a segment without arc carry no option."""
    arm = Arm(n=1, session=2, arm=3, tag=4, settings=5, event=6)
    assert encode_request(arm) == b"arm 1 00000002 3 00000004 00000005 6"
    assert encode_request(Segment(n=1, session=2, v=3, i=4, ticks=5)) == b"seg 1 00000002 3 4 5"
    full = Arm(n=1, session=2, arm=3, tag=4, settings=5, event=6, pause=(3, 1000, 60000), tighter={"oc": 9})
    assert encode_request(full) == b"arm 1 00000002 3 00000004 00000005 6 pause=3,1000,60000 oc=9"


def test_base64_with_padding_is_a_field_not_an_option() -> None:
    """A last field that ends with equals signs is not read as ``key=value``, whatever its letters."""
    for text in ("Zm9vYg==", "abcd", "abc=", "ab=="):
        assert decode_received(f"ok 1 snap 3 {text}".encode(), "ss") == Ok(n=1, verb="snap", words=("3", text))


@given(st.integers(1, 2**32 - 1), st.integers(0, 2**32 - 1))
def test_the_renewals_short_way_writes_the_same(session: int, index: int) -> None:
    """The line that is sent all the time has a writer of its own; it may not differ from the table's."""
    assert frames.renewal(session, index) == encode_request(frames.Renew(session=session, index=index))
