"""One connection: order, stops ahead of everything, waits, bounds; hostile bytes harm nothing."""

import random

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hvhost.publish.instrument.commands import TREE
from hvhost.publish.instrument.session import Session, Stop, TalkLimits, parsed, stop_of, stops_in
from hvhost.publish.instrument.syntax import Unit, parse_message
from hvhost.publish.snapshot import Permission
from tests.publish.instrument.fakes import Client, Talk


def _energised(talk: Talk, volts: str = "1KV") -> Client:
    """A client in control of an energised direct run at this voltage."""
    client = talk.client().take_seat()
    client.write(f"VOLT {volts};:CURR 1MA")
    talk.bench.arm()
    talk.show()
    client.write("OUTP ON")
    assert client.ask("*OPC?") == "1"
    assert client.errors() == []
    return client


# ---------------------------------------------------------------- order and answers


def test_answers_of_one_line_come_in_one_line() -> None:
    """IEEE 488.2, 8.4: response units between semicolons, one newline at the end."""
    client = Talk().client()
    assert client.ask("*ESE 36;*ESE?;*SRE?;SYST:VERS?") == "36;0;1999.0"
    assert client.answers == []


def test_bytes_may_come_one_by_one_or_many_lines_at_once() -> None:
    """TCP knows no lines."""
    client = Talk().client()
    for byte in b"*ESE 1\r\n*ESE?\r\n":
        client.raw(bytes([byte]))
    assert client.read() == "1"
    client.raw(b"*ESE 2\n*ESE?\n\n \n*ESE 3\n*ESE?\n*IDN")
    assert (client.read(), client.read()) == ("2", "3")
    client.raw(b"?\n")
    assert client.read().startswith("hvhost,demo,0,")


def test_a_command_error_voids_the_rest_of_its_line() -> None:
    """What follows may have relied on it; what came before it is done."""
    client = Talk().client()
    client.write("*ESE 1;VOLTA 5;*ESE 2")
    assert client.ask("*ESE?") == "1"
    assert client.errors() == ['-113,"Undefined header;VOLTA"']


def test_an_execution_error_does_not() -> None:
    """The line was understood; each command stands for itself."""
    client = Talk().client()
    client.write("*ESE 256;*SRE 4")
    assert client.ask("*SRE?") == "4"
    assert client.error() == -222


def test_each_connection_has_its_own_errors_and_registers() -> None:
    """What one does wrong the other does not see."""
    talk = Talk()
    one, two = talk.client(), talk.client()
    one.write("*CLS;*ESE 60;FOO")
    two.write("*CLS")
    assert (one.ask("*ESR?"), two.ask("*ESR?"), two.ask("*ESE?")) == ("32", "0", "0")
    assert (two.error(), one.error(), one.error()) == (0, -113, 0)


def test_a_query_that_fails_gives_no_answer_and_an_error() -> None:
    """Nothing is invented."""
    client = Talk().client()
    client.write("VOLT? 5")
    assert client.read() == ""
    assert client.error() == -224


# ---------------------------------------------------------------- stops


@pytest.mark.parametrize(("text", "stop"), [
    ("OUTP OFF", Stop.LOWER), ("outp off", Stop.LOWER), ("OUTPUT1:STATE 0", Stop.LOWER), ("OUTP 0.3", Stop.LOWER),
    ("OUTP -0", Stop.LOWER), ("OUTP\t#B0", Stop.LOWER), ("OUTP\x00off", Stop.LOWER), ("*RST", Stop.LOWER),
    ("*rst", Stop.LOWER), ("ABOR", Stop.CUT), (":ABORt", Stop.CUT), ("OUTP:POL?;STAT OFF", Stop.LOWER),
    ("SOUR:VOLT 5;OUTP OFF", Stop.LOWER), ("VOLT (;OUTP OFF", Stop.LOWER), ("FOO;*RST", Stop.LOWER),
    ("OUTP 1e-9", Stop.LOWER), ("OUTP +.0", Stop.LOWER)])
def test_every_way_to_write_a_stop_is_found_on_arrival(text: str, stop: Stop) -> None:
    """In any case, form and place, behind faults, behind a header that leads elsewhere."""
    talk = Talk()
    client = talk.client()
    client.session.receive(text.encode() + b"\n", talk.bench.now_s)
    assert talk.bench.methods == ["cut" if stop is Stop.CUT else "lower"]
    talk.work()
    assert talk.bench.methods == ["cut" if stop is Stop.CUT else "lower"]


@pytest.mark.parametrize("text", ["OUTP ON", "OUTP 1", "OUTP?", "OUTP", "VOLT 0", "*RST?", "ABOR?", "STAT OFF",
                                  "OUTP OFFF", "OUTP2 OFF", "OUTP:PROT:CLE 'OUTP OFF'", "STAT:OPER:ENAB 0"])
def test_what_is_no_stop_stops_nothing(text: str) -> None:
    """A string, a query, another header: nothing is lowered by a likeness."""
    talk = Talk()
    client = talk.client()
    client.write(text)
    assert not {"lower", "cut"} & set(talk.bench.methods)


def test_a_stop_goes_ahead_of_everything_that_waits() -> None:
    """Behind *WAI and many lines, the lowering is asked for while its bytes arrive; nothing queued switches on."""
    talk = Talk()
    client = _energised(talk)
    client.write("VOLT 20KV;*WAI;:CURR 2MA")
    client.raw(b"VOLT 24KV\n" * 50 + b"OUTP ON\n")
    assert talk.bench.methods[-1] == "set"
    client.session.receive(b"OUTP OFF\n", talk.bench.now_s)
    assert talk.bench.methods[-1] == "lower"
    talk.after(3.0)
    assert talk.bench.permission is Permission.IDLE
    assert talk.bench.methods[-1] == "lower"
    assert client.errors() == ['-200,"Execution error;not carried out: overtaken by a stop"']
    assert (client.ask("VOLT?"), client.ask("OUTP?")) == ("2.400000E+04", "0")


def test_what_comes_behind_a_stop_is_carried_out() -> None:
    """It was sent by somebody who knew of the stop."""
    client = Talk().client().take_seat()
    client.write("VOLT 5;*RST;VOLT 7")
    assert client.ask("VOLT?") == "7.000000E+00"
    assert client.errors() == []


def test_a_cut_among_lowers_is_a_cut() -> None:
    """The strongest stop of what came at once."""
    talk = Talk()
    client = talk.client()
    client.raw(b"OUTP OFF\nABOR\nOUTP OFF\n*RST\n")
    assert talk.bench.methods == ["cut"]


def test_a_burst_of_stops_is_one_stop() -> None:
    """A thousand of them cost what one costs."""
    talk = Talk()
    client = talk.client()
    client.raw(b"OUTP OFF\n" * 200)
    assert talk.bench.methods == ["lower"]


def test_a_clearing_of_the_latch_that_a_stop_overtook_is_not_carried_out() -> None:
    """Nothing that leads towards power follows a stop that came later."""
    talk = Talk()
    client = talk.client().take_seat()
    talk.bench.latched = ("overcurrent",)
    talk.show()
    client.write("*ESE 0;:OUTP:PROT:CLE 'overcurrent';:ABOR")
    assert "reset" not in talk.bench.methods
    assert client.errors()[1:] == ['-200,"Execution error;not carried out: overtaken by a stop"']


def test_a_stop_is_taken_from_a_torn_last_line_and_nothing_else_is() -> None:
    """A client that goes in the middle of a line has stopped if it stopped; 'VOLT 5' may have been 'VOLT 50'."""
    talk = Talk()
    client = talk.client().take_seat()
    client.raw(b"VOLT 5")
    client.session.no_more(talk.bench.now_s)
    assert client.ask("VOLT?") == "0.000000E+00"
    client.raw(b"outp off")
    client.session.no_more(talk.bench.now_s)
    assert talk.bench.methods[-1] == "lower"


def test_a_client_that_is_gone_frees_the_seat_and_nothing_of_it_is_carried_out() -> None:
    """What it left in its line of waiting is forgotten."""
    talk = Talk()
    client = talk.client().take_seat()
    client.session.blocked = True
    client.write("VOLT 5")
    client.session.ended(talk.bench.now_s)
    client.session.blocked = False
    talk.work()
    assert talk.device.settings.volts == 0.0
    assert talk.bench.seat.holder is None
    assert talk.bench.methods[-1] == "seat.release"


def test_a_client_that_never_asked_for_the_seat_does_not_release_it() -> None:
    """A reader that goes leaves the record alone."""
    talk = Talk()
    talk.client().session.ended(talk.bench.now_s)
    assert talk.bench.methods == []


def test_a_stop_that_fails_is_in_the_error_queue() -> None:
    """-241 with the advice."""
    talk = Talk()
    client = talk.client()
    talk.bench.reachable = False
    client.write("OUTP OFF")
    assert "use the emergency switching off" in client.errors()[0]


def test_stops_of_a_line_by_place() -> None:
    """Pure: which units stop, and what."""
    assert stops_in(b"VOLT 5;OUTP OFF;:ABOR", TREE) == ((1, Stop.LOWER), (2, Stop.CUT))
    unit = parse_message(b"OUTP ON")[0]
    assert isinstance(unit, Unit)
    assert stop_of(unit, TREE) is None
    assert parsed(b"*RST") == parse_message(b"*RST")


# ---------------------------------------------------------------- waits


def test_opc_query_answers_at_the_end_of_the_ramp() -> None:
    """And not before; what came behind it waits in order."""
    talk = Talk()
    client = _energised(talk)
    client.write("VOLT 3KV;*OPC?;:VOLT?")
    client.write("*ESE?")
    talk.after(0.3)
    assert client.answers == []
    talk.after(0.4)
    assert client.answers == ["1;3.000000E+03", "0"]
    assert talk.bench.volts == 3e3


def test_opc_sets_its_bit_at_the_end_of_the_ramp_and_hinders_nothing() -> None:
    """Commands go on meanwhile."""
    talk = Talk()
    client = _energised(talk)
    client.write("*CLS;VOLT 3KV;*OPC")
    assert client.ask("*ESR?") == "0"
    talk.after(0.6)
    assert client.ask("*ESR?") == "1"
    assert client.ask("*ESR?") == "0"


@pytest.mark.parametrize("cancel", ["*CLS", "*RST"])
def test_cls_and_rst_cancel_opc(cancel: str) -> None:
    """IEEE 488.2, 10.3 and 10.32: back to the idle state of operation complete."""
    talk = Talk()
    client = _energised(talk)
    client.write(f"VOLT 3KV;*OPC;*CLS;{cancel};*ESE 0")
    talk.after(2.0)
    assert int(client.ask("*ESR?")) & 1 == 0


def test_a_trip_ends_the_wait_with_the_cause_in_the_queue() -> None:
    """*OPC? answers, since nothing is pending any more; every connection learns why."""
    talk = Talk()
    client, other = _energised(talk), talk.client()
    client.write("VOLT 9KV;*OPC?")
    talk.after(0.2)
    assert client.answers == []
    talk.bench.trip("overcurrent")
    talk.after(0.1)
    assert client.answers == ["1"]
    for one in (client, other):
        assert '-300,"Device-specific error;tripped: overcurrent"' in one.errors()
    assert int(other.ask("*ESR?")) & 8


def test_wai_holds_back_what_follows() -> None:
    """And a lowering by somebody else ends it with an error."""
    talk = Talk()
    client = _energised(talk)
    client.write("VOLT 9KV;*WAI;*ESE 7")
    talk.after(0.2)
    assert client.session.status.ese == 0
    talk.bench.ask("lower", {"ticket": "x"}, "another")
    talk.after(2.0)
    assert client.session.status.ese == 7
    assert [text.partition(",")[0] for text in client.errors()] == ["-200"]


def test_with_nothing_under_way_nothing_waits() -> None:
    """*OPC? answers 1 at once, *OPC sets its bit at once."""
    client = Talk().client()
    client.write("*CLS;*OPC;*WAI;*OPC?;*ESR?")
    assert client.read() == "1;1"


# ---------------------------------------------------------------- bounds


def test_a_line_that_is_too_long_is_dropped_and_told_once() -> None:
    """A megabyte without an end costs a kilobyte; the next line is taken."""
    client = Talk().client()
    for _ in range(64):
        client.raw(b"V" * 16_384)
    client.raw(b"OLT 5\n*ESE?\n")
    assert client.read() == "0"
    assert client.errors() == ['-363,"Input buffer overrun"']
    assert client.session.lost == 64
    assert not client.session.hopeless


def test_faster_than_the_rate_waits_and_is_not_lost() -> None:
    """A script that sends without reading is slowed down, in order."""
    talk = Talk()
    client = talk.client(TalkLimits(rate_hz=100.0, burst=5.0))
    client.session.receive(b"*ESE?\n" * 50, talk.bench.now_s)
    done = 0.0
    while client.session.ready:
        wait_s = client.session.turn(talk.bench.now_s)
        talk.bench.now_s += wait_s
        done += wait_s
    assert len(client.answers) == 50
    assert done == pytest.approx(0.45, abs=0.02)


def test_what_waits_is_bounded_in_lines_and_bytes_and_the_rest_is_counted() -> None:
    """-363 once a second, not one for each; stops are taken all the same."""
    talk = Talk()
    client = talk.client(TalkLimits(waiting=10, waiting_bytes=1000))
    client.session.blocked = True
    client.session.receive(b"*ESE?\n" * 25, talk.bench.now_s)
    assert client.session.lost == 15
    client.session.receive(b"OUTP OFF\n", talk.bench.now_s)
    assert talk.bench.methods == ["lower"]
    client.session.blocked = False
    talk.work()
    assert len(client.answers) == 10
    client.answers.clear()
    assert client.errors() == ['-430,"Query DEADLOCKED;answers are not read"']
    client.session.blocked = True
    client.session.receive(b"*ESE 1;" + b" " * 600 + b"\n" + b"*ESE 2;" + b" " * 600 + b"\n", talk.bench.now_s)
    assert client.session.lost == 17


def test_whoever_floods_is_hopeless() -> None:
    """More lost lines than any honest client sends by mistake."""
    talk = Talk()
    client = talk.client(TalkLimits(waiting=1, lost_most=100))
    client.session.receive(b"*ESE?\n" * 100, talk.bench.now_s)
    assert not client.session.hopeless
    client.session.receive(b"*ESE?\n" * 100, talk.bench.now_s)
    assert client.session.hopeless


def test_a_blocked_client_is_asked_nothing_more() -> None:
    """Answers that are not read are not made."""
    talk = Talk()
    client = talk.client()
    client.session.blocked = True
    client.write("*ESE?")
    assert not client.session.ready
    assert client.session.turn(talk.bench.now_s) == 0.0
    assert client.answers == []


def test_a_connection_for_stops_only_stops_and_says_so() -> None:
    """Beyond the number of clients a stop still works."""
    talk = Talk()
    client = talk.client(stops_only=True)
    client.write("*IDN?")
    assert client.read() == '-200,"Execution error;too many clients: this connection only stops"'
    client.write("OUTP OFF")
    assert talk.bench.methods == ["lower"]


def test_a_long_message_takes_several_turns() -> None:
    """No client holds the loop for a whole line of commands."""
    talk = Talk()
    client = talk.client()
    client.session.receive(b";".join([b"*ESE?"] * 20) + b"\n", talk.bench.now_s)
    client.session.turn(talk.bench.now_s)
    assert client.session.ready
    assert client.answers == []
    client.session.turn(talk.bench.now_s)
    client.session.turn(talk.bench.now_s)
    assert client.answers == [";".join(["0"] * 20)]
    assert client.session.idle


def test_a_fault_of_ours_is_told_and_ends_nothing() -> None:
    """Whatever a handler raises stays in the connection, counted."""
    talk = Talk()
    client = talk.client()

    def broken(method: str, params: dict[str, object], who: str) -> dict[str, object]:
        raise RuntimeError("surprise")

    talk.device._ask = broken
    client.write("VOLT 5;*ESE 3")
    client.write("OUTP OFF")
    assert client.session.faults == 2
    assert client.errors()[0] == '-300,"Device-specific error;a fault of ours: RuntimeError"'
    assert client.ask("*ESE?") == "3"


# ---------------------------------------------------------------- hostile bytes

WORDS = ["VOLT", "CURR", "OUTP", "SOUR", "SLEW", "LEV", "PROT", "CLE", "SYST", "ERR", "LOCK", "REQ", "STAT", "OPER",
         "ENAB", "MEAS", "*RST", "*CLS", "*OPC", "*WAI", "*STB", "ON", "OFF", "MIN", "MAX", "5", "1e9", "-3", "MV",
         "KV", ":", ";", "?", ",", " ", '"', "'", "#H", "#0", "(", ")", "\x00", "\xff", "1" * 300, "A" * 40]
GARBLED = st.one_of(st.binary(max_size=80), st.lists(st.sampled_from(WORDS), max_size=12).map(
    lambda words: "".join(words).encode("latin-1")))


def _unharmed(talk: Talk, client: Client) -> None:
    """The connection still answers, nothing was switched on, no fault of ours."""
    client.write("*CLS")
    talk.after(0.3)
    client.answers.clear()
    assert client.ask("*IDN?").startswith("hvhost,demo,0,")
    assert client.error() == 0
    assert client.session.faults == 0
    assert talk.bench.permission is Permission.IDLE
    assert not talk.device.on


@settings(max_examples=60, deadline=None)
@given(st.lists(GARBLED, max_size=20))
def test_any_lines_leave_the_connection_working(lines: list[bytes]) -> None:
    """Garbled, torn, near misses, binary: errors in the queue and nothing else."""
    talk = Talk()
    client = talk.client()
    client.raw(b"\n".join(lines) + b"\n")
    _unharmed(talk, client)


def test_ten_thousand_fuzzed_lines_do_no_harm() -> None:
    """Seeded: mutated real commands and noise; memory bounded, the seat as it was, still answering."""
    rng = random.Random(20251201)
    real = [b"VOLT 5KV", b"CURR 1MA", b"OUTP ON", b"MEAS:VOLT?", b"SYST:ERR?", b"*OPC?", b"STAT:OPER:ENAB 5",
            b'OUTP:PROT:CLE "overcurrent"', b"SYST:LOCK:REQ?", b"SOUR:VOLT:LEV:IMM:AMPL MAX;SLEW DEF"]
    talk = Talk()
    client = talk.client()
    for number in range(10_000):
        line = bytearray(rng.choice(real))
        for _ in range(rng.randrange(4)):
            at = rng.randrange(len(line) + 1)
            line[at:at + rng.randrange(3)] = bytes(rng.randrange(256) for _ in range(rng.randrange(3)))
        client.session.receive(bytes(line) + b"\n", talk.bench.now_s)
        talk.work()
        if number % 4 == 0:
            talk.after(0.1)
        assert len(client.session.status.errors) <= 32
    while not client.session.idle:
        talk.after(0.1)
    assert len(client.answers) > 1_000  # many lines were still what they had been
    _unharmed(talk, client)
    assert client.session.lost == 0
    assert isinstance(client.session, Session)
