"""Program messages: the grammar of IEEE 488.2 and the walk through the tree of SCPI-99; any bytes give units only."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.publish.instrument.errors import Err
from hvhost.publish.instrument.syntax import (
    MESSAGE_MAX,
    PARAMETERS_MAX,
    UNITS_MAX,
    Broken,
    Kind,
    Param,
    Unit,
    parse_message,
)


def units(text: str) -> list[Unit]:
    """The units of a message without faults."""
    found = parse_message(text.encode("latin-1"))
    assert all(isinstance(one, Unit) for one in found), found
    return [one for one in found if isinstance(one, Unit)]


def headers(text: str) -> list[str]:
    """The headers from the root, with their question marks."""
    return [":".join(one.header) + "?" * one.query for one in units(text)]


def number_of_error(text: str | bytes) -> Err:
    """The first fault of a message."""
    data = text if isinstance(text, bytes) else text.encode("latin-1")
    return next(one.error.number for one in parse_message(data) if isinstance(one, Broken))


@pytest.mark.parametrize(("text", "walked"), [
    ("*IDN?", ["*IDN?"]),
    ("VOLT 5", ["VOLT"]),
    (":VOLT 5", ["VOLT"]),
    ("volt:lev 5", ["VOLT:LEV"]),
    ("SOUR:VOLT 5;CURR 1", ["SOUR:VOLT", "SOUR:CURR"]),
    ("SOUR:VOLT 5;:CURR 1", ["SOUR:VOLT", "CURR"]),
    ("SOUR:VOLT:LEV 5;SLEW 1;SLEW?", ["SOUR:VOLT:LEV", "SOUR:VOLT:SLEW", "SOUR:VOLT:SLEW?"]),
    ("SYST:ERR?;*CLS;VERS?", ["SYST:ERR?", "*CLS", "SYST:VERS?"]),
    ("VOLT 5;CURR 1", ["VOLT", "CURR"]),
    ("STAT:OPER:ENAB 1;NTR 2;:STAT:QUES?", ["STAT:OPER:ENAB", "STAT:OPER:NTR", "STAT:QUES?"]),
    ("  *RST ; ;; *OPC? ;", ["*RST", "*OPC?"]),
    ("\x00\t*IDN?\r", ["*IDN?"]),
    ("", []), (" \r", [])])
def test_headers_go_on_from_where_the_last_one_stood(text: str, walked: list[str]) -> None:
    """SCPI-99 volume 1, 6.2.4; common commands leave the place alone; control characters are white space."""
    assert headers(text) == walked


@pytest.mark.parametrize(("text", "param"), [
    ("5", Param(kind=Kind.NUMBER, text="5")),
    ("+.5", Param(kind=Kind.NUMBER, text="+.5")),
    ("5.", Param(kind=Kind.NUMBER, text="5.")),
    ("-1.5e3", Param(kind=Kind.NUMBER, text="-1.5", exponent=3)),
    ("1.5 E -3 kV", Param(kind=Kind.NUMBER, text="1.5", exponent=-3, suffix="KV")),
    ("500v/s", Param(kind=Kind.NUMBER, text="500", suffix="V/S")),
    ("5 EV", Param(kind=Kind.NUMBER, text="5", suffix="EV")),
    ("min", Param(kind=Kind.WORD, text="MIN")),
    ('"a;b,""c"""', Param(kind=Kind.STRING, text='a;b,"c"')),
    ("'it''s'", Param(kind=Kind.STRING, text="it's")),
    ("#hFf", Param(kind=Kind.NON_DECIMAL, text="255")),
    ("#Q17", Param(kind=Kind.NON_DECIMAL, text="15")),
    ("#b101", Param(kind=Kind.NON_DECIMAL, text="5"))])
def test_parameters_by_their_form(text: str, param: Param) -> None:
    """Decimal and non-decimal numbers, words, strings with both kinds of quotes."""
    assert units(f"X {text}")[0].params == (param,)
    assert units(f"X {text} , {text};Y")[0].params == (param, param)


@pytest.mark.parametrize(("text", "number"), [
    ("VOLT 5 6", Err.INVALID_SEPARATOR), ("VOLT 5,", Err.SYNTAX), ("VOLT ,5", Err.SYNTAX), ("5", Err.SYNTAX),
    ("VOLT,5", Err.HEADER_SEPARATOR), ('OUTP:PROT:CLE"x"', Err.HEADER_SEPARATOR), ("VOLT??", Err.HEADER_SEPARATOR),
    ("ABCDEFGHIJKLM 5", Err.MNEMONIC_TOO_LONG), ("VOLT ABCDEFGHIJKLM", Err.CHARACTER_DATA_TOO_LONG),
    ("VOLT +", Err.INVALID_IN_NUMBER), ("VOLT .", Err.INVALID_IN_NUMBER), ("VOLT 1_000", Err.INVALID_IN_NUMBER),
    ("VOLT 1.2.3", Err.INVALID_IN_NUMBER), ("VOLT #H", Err.INVALID_IN_NUMBER), ("VOLT #", Err.INVALID_IN_NUMBER),
    ("VOLT 1e40000", Err.EXPONENT_TOO_LARGE), ("VOLT 1e" + "9" * 500, Err.EXPONENT_TOO_LARGE),
    ("VOLT " + "9" * 256, Err.TOO_MANY_DIGITS), ("VOLT 1 " + "V" * 13, Err.SUFFIX_TOO_LONG),
    ('CLE "open', Err.INVALID_STRING), ('CLE "\xe4"', Err.INVALID_STRING), ("VOLT #15hello", Err.BLOCK_NOT_ALLOWED),
    ("VOLT #0hello", Err.BLOCK_NOT_ALLOWED), ("VOLT (1+1)", Err.EXPRESSION_NOT_ALLOWED),
    ("VOLT \xb5", Err.INVALID_CHARACTER), ("\xe9", Err.INVALID_CHARACTER), ("VOLT\xa05", Err.INVALID_CHARACTER),
    ("VOLT 5\xb5V", Err.INVALID_CHARACTER), ("A:B:C:D:E:F:G:H:I", Err.UNDEFINED_HEADER),
    ("X " + ",".join("1" * (PARAMETERS_MAX + 1)), Err.TOO_MUCH_DATA), ("*CLS;" * (UNITS_MAX + 1), Err.TOO_MUCH_DATA),
    ("V" * (MESSAGE_MAX + 1), Err.INPUT_OVERRUN)])
def test_what_breaks_the_grammar_is_told_by_the_standards_number(text: str, number: Err) -> None:
    """Lengths and depths are bounded; every fault has a number of its class."""
    assert number_of_error(text) is number


def test_leading_zeros_are_no_digits() -> None:
    """IEEE 488.2, 7.7.2.4.1: 255 digits, leading zeros not counted."""
    assert units("VOLT " + "0" * 300 + "7" * 255)[0].params[0].text.endswith("77")


def test_a_broken_unit_does_not_hide_what_comes_after_it() -> None:
    """The reader goes on behind the next semicolon, so that a stop in the same line is found."""
    found = parse_message(b"VOLT (1;OUTP OFF;CURR @;*RST")
    assert [type(one) for one in found] == [Broken, Unit, Broken, Unit]
    assert [one.header for one in found if isinstance(one, Unit)] == [("OUTP",), ("*RST",)]


def test_a_unit_keeps_what_was_written_of_it() -> None:
    """Behind SOUR: a bare OUTP is another header, and what was meant is still known."""
    unit = units("SOUR:VOLT 5;OUTP OFF")[1]
    assert (unit.header, unit.written) == (("SOUR", "OUTP"), ("OUTP",))


@given(st.binary(max_size=1200))
def test_any_bytes_yield_units_only(data: bytes) -> None:
    """Nothing raises, nothing grows: at most one unit more than the bound."""
    found = parse_message(data.replace(b"\n", b""))
    assert len(found) <= UNITS_MAX + 1
    assert all(isinstance(one, Unit | Broken) for one in found)


@given(st.text(st.sampled_from("VOLTCURSEP:;*?, \"'#()+-.0123456789eEkmV/\t"), max_size=200))
def test_any_text_of_the_grammars_own_letters_yields_units_only(text: str) -> None:
    """Near misses are where parsers break."""
    for one in parse_message(text.encode("ascii")):
        if isinstance(one, Unit):
            assert all(mnemonic.strip("*").isidentifier() for mnemonic in one.header)
            assert len(one.params) <= PARAMETERS_MAX


@given(st.lists(st.sampled_from(["*IDN?", "VOLT 5", "OUTP:STAT ON", 'OUTP:PROT:CLE "a;b"']), max_size=8))
def test_joining_messages_joins_their_units(texts: list[str]) -> None:
    """Headers from the root mean the same alone and in a chain."""
    rooted = [text if text.startswith("*") else f":{text}" for text in texts]
    alone = [unit for text in rooted for unit in units(text)]
    assert units(";".join(rooted)) == alone
