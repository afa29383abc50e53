"""Numbers, replay, stops outside the numbering, and what a line must be to be obeyed."""

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hvhost.wire.frames import Ok
from hvhost.wire.lines import seal
from hvhost.wire.settings import KEYS, PAGE, PAGES
from hvhost.wire.vocabulary import CutWhy, Inputs, LowerWhy, McuState
from tests.standin.fakes import SESSION, SETTINGS, Bench


def test_every_request_needs_a_session_but_cut():
    """Without a greeting everything is refused with `session`, except the cut (PROTOCOL 3.7, 7.6)."""
    bench = Bench(hello=False)
    for verb, fields in (("info", "0"), ("get", "0"), ("seg", "1 1 1"), ("reset", "00000000 0"), ("again", "1")):
        assert bench.code(verb, fields, n=1) == "session"
    bench.line(f"lower 1 {SESSION:08X}")
    assert bench.last().code == "session"
    bench.line(f"arc 1 {SESSION:08X} 1")
    assert bench.last().code == "session"
    bench.line("cut 9 0")
    assert bench.last() == Ok(n=9, verb="cut")


def test_a_repeat_gets_the_same_answer_and_is_not_executed():
    """A segment sent twice with one number is queued once (PROTOCOL 3.9)."""
    bench = Bench().energised(v=0)
    bench.seg(1000, ticks=10_000)
    first = bench.last()
    bench.n -= 1
    bench.seg(1000, ticks=10_000)
    assert bench.last() == first
    bench.pass_ms(3_000)
    assert bench.kinds().count("segment") == 1


@pytest.mark.parametrize("step", [0, 2, 3, -1])
def test_a_number_out_of_order_is_refused(step):
    """Only the last number and the next are known (PROTOCOL 3.10); the refusal takes no number (3.11)."""
    bench = Bench()
    n = bench.n
    bench.ask("info", "0")
    assert bench.code("info", "0", n=n + 1 + step) == ("number" if step else "")
    assert bench.code("info", "0", n=n + 2) == ""


def test_a_refusal_takes_its_number_and_is_repeated():
    """An answer is an answer: a refused request is not tried again behind the host's back (PROTOCOL 3.9)."""
    bench = Bench()
    assert bench.arm(arm=7) == "arm"
    refused = bench.kinds().count("refused")
    bench.line(bench.arm_line(arm=7, n=bench.n))
    assert bench.last().code == "arm"
    assert bench.kinds().count("refused") == refused


@pytest.mark.parametrize(("body", "answer"), [
    ("bogus 5 C0FFEE01", "err 5 bogus unknown"), ("Bogus 5", "err 5 unknown unknown"),
    ("info {n} C0FFEE01", "err {n} info malformed"), ("info {n} C0FFEE01 0 0", "err {n} info malformed"),
    ("info {n} C0FFEE01 00", "err {n} info malformed"), ("info x C0FFEE01 0", "err 0 info malformed"),
    ("info {n} C0FFEE01 9", "err {n} info range"), ("seg {n} C0FFEE01 70000 0 1", "err {n} seg range"),
    ("seg {n} 00000001 70000 0 1", "err {n} seg session"), ("cut 3", "err 3 cut malformed"),
    ("hello 2147483649 00000000 1 500", "err 2147483649 hello range"),
    ("hello 2147483650 00000007 2 500", "err 2147483650 hello version"),
    ("hello 2147483650 00000007 1 50", "err 2147483650 hello range")])
def test_what_cannot_be_read_is_answered_with_its_code(body, answer):
    """Unknown, malformed and out of range each have their code and number (PROTOCOL 3.5, 3.6)."""
    bench = Bench()
    n = bench.n + 1
    bench.line(body.format(n=n))
    refusal = bench.last()
    assert f"err {refusal.n} {refusal.verb} {refusal.code}" == answer.format(n=n)
    assert bench.state is McuState.OFF


def test_unknown_options_are_skipped():
    """A newer host's option does no harm (PROTOCOL 3.3)."""
    bench = Bench()
    assert bench.code("info", "0 colour=blue") == ""


def test_a_bad_line_is_counted_and_neither_acted_on_nor_answered():
    """One wrong CRC digit makes a cut nothing but a count (PROTOCOL 2.4)."""
    bench = Bench().energised()
    answers = len(bench.answers)
    line = seal(b"cut 1 0")
    bench.mcu.feed(line[:-2] + (b"0" if line[-2:-1] != b"0" else b"1") + b"\n", bench.tick)
    bench.collect()
    assert bench.state is McuState.ENERGISED
    assert len(bench.answers) == answers
    assert bench.mcu.session.garbled == 1


def test_a_cut_behind_a_torn_line_is_obeyed():
    """The LF in front of a stop ends whatever was torn off (PROTOCOL 7.2)."""
    bench = Bench().energised()
    bench.mcu.feed(seal(b"seg 9 C0FFEE01 30000 30000 10000")[:20], bench.tick)
    bench.cut()
    assert bench.dead
    assert bench.last().verb == "cut"


@settings(max_examples=60, deadline=None)
@given(st.lists(st.binary(max_size=80), max_size=8))
def test_any_bytes_yield_answers_and_counts_only(chunks):
    """Whatever comes down the line, the output of an MCU that is off stays off."""
    bench = Bench()
    for chunk in chunks:
        bench.mcu.feed(chunk, bench.tick)
        bench.pass_ms(1)
    assert bench.dead
    assert bench.state is McuState.OFF


FIELDS = st.sampled_from(["0", "1", "7", "65535", "4294967295", "4294967296", "-1", "00", "C0FFEE01", "00000000",
                          "FFFFFFFF", "warn", "oc", "pause=1,2", "pause=1,2,3", "oc=5", "oc=", "=", "arc=1", "x", ""])


@settings(max_examples=150, deadline=None)
@given(st.lists(st.tuples(st.sampled_from(["hello", "info", "get", "put", "save", "arm", "seg", "renew", "lower", "arc",
                                           "cut", "reset", "again", "snap", "stored", "ok", "", "b", "nosuch"]),
                          st.integers(0, 3), st.lists(FIELDS, max_size=7)), max_size=12))
def test_any_well_sealed_line_is_answered_or_skipped(lines):
    """Whatever its fields, a request does not end the MCU, and all but renewals get one answer (PROTOCOL 3.4)."""
    bench = Bench()
    for verb, step, fields in lines:
        body = " ".join([verb, str(bench.n + step), f"{bench.session:08X}", *fields])
        before = len(bench.answers)
        bench.line(body)
        assert len(bench.answers) - before == (verb != "renew")
        assert bench.board.inhibit


def test_the_greeting_tells_everything():
    """Four pages and all settings: what the host needs to know, each key once (PROTOCOL 4.8, 4.13)."""
    bench = Bench()
    pages = [bench.ask("info", str(page)).pairs for page in range(4)]
    assert pages[0]["proto"] == "1"
    assert pages[1]["signs"] == "ss"
    assert pages[2] == {"tick": "10000", "sample": "10", "skew": "0", "block": "32", "queue": "4", "before": "64",
                        "after": "64"}
    assert pages[3]["settings"] == f"{SETTINGS.checksum:08X}"
    assert pages[3]["arm"] == "0"
    values = []
    for page in range(PAGES):
        words = bench.ask("get", str(page)).words
        assert words[0] == str(page)
        assert len(words) - 1 <= PAGE
        values += map(int, words[1:])
    assert tuple(values) == SETTINGS.values
    assert bench.code("get", str(PAGES)) == "range"


def test_a_greeting_repeated_is_a_repeat_and_another_opens_a_session():
    """The same hello is answered again without an event; one after other requests is a new session (PROTOCOL 4.3)."""
    bench = Bench(hello=False)
    first = bench.hello()
    assert bench.hello() == first
    assert bench.kinds().count("session") == 1
    bench.ask("info", "0")
    bench.hello()
    assert bench.kinds().count("session") == 2
    assert bench.code("info", "0", n=1) == ""


def test_a_new_session_empties_the_replay_memory():
    """Number 1 of the new session is executed, not answered from the old one (PROTOCOL 4.5)."""
    bench = Bench(hello=False)
    bench.hello()
    bench.ask("info", "0", n=1)
    bench.hello(session=7)
    assert bench.ask("info", "3", n=1).words == ("3",)


@pytest.mark.parametrize(("state", "why"), [("requested", "cut"), ("warning", "cut"), ("energised", "lowering"),
                                            ("lowering", "lowering"), ("pausing", "cut")])
def test_a_new_session_ends_what_the_old_one_began(state, why):
    """It lowers if energised, cuts if pausing or preparing, and voids the arm (PROTOCOL 4.6)."""
    bench = Bench()
    if state == "requested":
        bench.arm()
    elif state == "warning":
        bench.warned()
    else:
        bench.energised(pause=(3, 500, 10_000))
        if state == "lowering":
            bench.lower()
        elif state == "pausing":
            bench.arc(bench.mcu.core.index)
    assert bench.state is McuState[state.upper()]
    bench.hello(session=99)
    assert bench.state is (McuState.LOWERING if why == "lowering" else McuState.OFF)
    assert not bench.mcu.core.armed
    if state == "energised":
        assert bench.event("lowering").a == LowerWhy.SESSION
    if state == "pausing":
        assert bench.event("cut").a == CutWhy.SESSION
    bench.pass_ms(3_000)
    assert bench.dead
    assert not bench.mcu.latched


def test_settings_are_written_whole_with_the_interlock_open_only():
    """Staged values change nothing until a save with the right checksum and an open interlock (PROTOCOL 14.4)."""
    bench = Bench()
    wanted = SETTINGS.with_(warn=5000, oc=12345)
    assert bench.code("put", "warn 5000") == ""
    assert bench.code("put", "oc 12345") == ""
    assert bench.code("put", "warn 1") == "range"
    assert bench.code("put", "nosuch 1") == "range"
    assert bench.code("save", "00000000") == "checksum"
    assert bench.code("save", f"{wanted.checksum:08X}") == "closed"
    assert bench.eeprom.settings == SETTINGS
    bench.board.open(Inputs.INTERLOCK)
    bench.pass_ms(5)
    assert bench.ask("save", f"{wanted.checksum:08X}").words == (f"{wanted.checksum:08X}",)
    assert bench.eeprom.settings == wanted
    bench.board.close(Inputs.INTERLOCK)
    bench.pass_ms(200)
    assert bench.arm(settings=SETTINGS.checksum) == "settings"


def test_blank_settings_refuse_arm_and_get_and_are_commissioned_with_every_key():
    """Blank: `arm`, `get` and a partial `save` are refused; all keys staged under a latch mend it (PROTOCOL 14.5)."""
    bench = Bench(None, clear=False)
    assert bench.ask("info", "3").pairs["blank"] == "1"
    assert bench.code("get", "0") == "blank"
    bench.pass_ms(50)
    assert bench.arm() == "blank"
    bench.board.open(Inputs.INTERLOCK)
    for key in KEYS[:-1]:
        assert bench.code("put", f"{key} {SETTINGS[key]}") == ""
    assert bench.code("save", f"{SETTINGS.checksum:08X}") == "checksum"
    bench.ask("put", f"{KEYS[-1]} {SETTINGS[KEYS[-1]]}")
    assert bench.code("save", f"{SETTINGS.checksum:08X}") == ""
    bench.board.close(Inputs.INTERLOCK)
    bench.pass_ms(200)
    assert bench.code("reset", f"{bench.causes:08X} 0") == ""
    assert bench.arm() == ""


def test_damaged_settings_refuse_the_arm():
    """One flipped cell: no settings are in force (PROTOCOL 5.4)."""
    bench = Bench()
    bench.eeprom.damage(200)
    bench.mcu.reset(1)
    bench.hello()
    bench.pass_ms(50)
    assert bench.arm() == "blank"
