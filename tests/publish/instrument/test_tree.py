"""The tree's mechanics: long and short forms from one table, optional nodes, suffixes."""

import pytest

from hvhost.publish.instrument.errors import Err, ScpiError
from hvhost.publish.instrument.syntax import Kind, Param
from hvhost.publish.instrument.tree import (
    Command,
    Node,
    Tree,
    check_count,
    headers_of,
    listing,
    nodes_of,
    short_form,
)


def _nothing(session: object, params: object) -> None:
    return None


SMALL = Tree((Command(pattern="[SOURce[1]]:VOLTage[:LEVel]", act=_nothing, query=_nothing, does="volts | amps", least=1,
                      most=1, most_asked=1, takes="<n>|MIN"),
              Command(pattern="STATus:PRESet", act=_nothing, does="presets"),
              Command(pattern="*IDN", query=_nothing, does="identity")))


# Short forms that the standard's own tables print (SCPI-99 volume 2; some seen in many public drivers).
@pytest.mark.parametrize(("long", "short"), [
    ("VOLTage", "VOLT"), ("CURRent", "CURR"), ("MEASure", "MEAS"), ("OUTPut", "OUTP"), ("PROTection", "PROT"),
    ("STATus", "STAT"), ("SYSTem", "SYST"), ("ERRor", "ERR"), ("AMPLitude", "AMPL"), ("LEVel", "LEV"),
    ("IMMediate", "IMM"), ("LIMit", "LIM"), ("RANGe", "RANG"), ("TRIPped", "TRIP"), ("TRIGger", "TRIG"),
    ("STEP", "STEP"), ("MODE", "MODE"), ("POWer", "POW"), ("TIME", "TIME"), ("DELay", "DEL"), ("CLEar", "CLE"),
    ("QUEStionable", "QUES"), ("OPERation", "OPER"), ("ENABle", "ENAB"), ("CONDition", "COND"), ("EVENt", "EVEN"),
    ("PRESet", "PRES"), ("VERSion", "VERS")])
def test_the_short_form_is_four_letters_or_three_before_a_vowel(long: str, short: str) -> None:
    """SCPI-99 volume 1, 6.2.1."""
    assert short_form(long) == short


def test_a_pattern_is_written_as_the_standard_writes_it() -> None:
    """Brackets around a node make it optional, [1] behind it allows the suffix."""
    assert nodes_of("[SOURce[1]]:VOLTage[:LEVel]") == (Node("SOURce", True, True), Node("VOLTage", False, False),
                                                      Node("LEVel", True, False))
    assert nodes_of("OUTPut[1][:STATe]") == (Node("OUTPut", False, True), Node("STATe", True, False))


def test_every_way_to_write_a_header() -> None:
    """Two forms of each node, optional ones left out, nothing in between."""
    written = {":".join(name for name, _ in header) for header in headers_of("[SOURce]:VOLTage[:LEVel]")}
    assert written == {f"{s}{v}{lev}" for s in ("", "SOUR:", "SOURCE:") for v in ("VOLT", "VOLTAGE")
                       for lev in ("", ":LEV", ":LEVEL")}


@pytest.mark.parametrize("header", [("VOLT",), ("VOLTAGE",), ("SOUR", "VOLT"), ("SOURCE1", "VOLT", "LEVEL"),
                                    ("SOUR1", "VOLTAGE", "LEV")])
def test_a_header_is_found_in_every_form(header: tuple[str, ...]) -> None:
    """Short, long, with and without what is optional, with the suffix 1 where one may stand."""
    assert SMALL.find(header, query=False) is SMALL.commands[0]


@pytest.mark.parametrize("header", [("VOL",), ("VOLTA",), ("VOLTAG",), ("VOLTAGES",), ("LEV",), ("SOUR",), (),
                                    ("VOLT", "VOLT"), ("VOLT1",), ("VOLT", "LEV1"), ("*IDN1",), ("IDN",),
                                    ("STATE", "PRES"), ("*RST",)])
def test_nothing_in_between_is_found(header: tuple[str, ...]) -> None:
    """Only the two forms: VOLTA and VOL are undefined headers."""
    for query in (False, True):
        with pytest.raises(ScpiError) as caught:
            SMALL.find(header, query=query)
        assert caught.value.number is Err.UNDEFINED_HEADER
        assert not SMALL.has(header, query=query)


@pytest.mark.parametrize("header", [("SOUR2", "VOLT"), ("SOURCE0", "VOLT"), ("SOUR11", "VOLT"), ("SOUR01", "VOLT")])
def test_a_channel_that_does_not_exist_is_a_suffix_out_of_range(header: tuple[str, ...]) -> None:
    """There is one channel."""
    with pytest.raises(ScpiError) as caught:
        SMALL.find(header, query=True)
    assert caught.value.number is Err.HEADER_SUFFIX


def test_a_form_that_a_header_does_not_have_is_undefined() -> None:
    """A query of what only acts, a command of what only answers."""
    for header, query in ((("STAT", "PRES"), True), (("*IDN",), False)):
        with pytest.raises(ScpiError) as caught:
            SMALL.find(header, query=query)
        assert caught.value.number is Err.UNDEFINED_HEADER


def test_two_commands_cannot_be_written_alike() -> None:
    """A table that is ambiguous does not even load."""
    with pytest.raises(ValueError, match="two commands are written VOLT"):
        Tree((Command(pattern="VOLTage", does="a", act=_nothing), Command(pattern="VOLTs", does="b", act=_nothing)))


def test_parameters_are_counted() -> None:
    """-109 where one is missing, -108 where there is one too many, each form for itself."""
    one = (Param(kind=Kind.NUMBER, text="1"),)
    command = SMALL.commands[0]
    check_count(command, one, query=False)
    check_count(command, (), query=True)
    for params, query, number in (((), False, Err.MISSING_PARAMETER), (one + one, False, Err.PARAMETER_NOT_ALLOWED),
                                  (one + one, True, Err.PARAMETER_NOT_ALLOWED)):
        with pytest.raises(ScpiError) as caught:
            check_count(command, params, query=query)
        assert caught.value.number is number


def test_the_listing_has_a_row_for_every_command() -> None:
    """A Markdown table: bars inside cells are escaped."""
    lines = listing(SMALL).splitlines()
    assert len(lines) == 2 + len(SMALL.commands)
    assert lines[2] == r"| `[SOURce[1]]:VOLTage[:LEVel]` | `<n>\|MIN` | nothing |  | volts \| amps |"
    assert "no such form" in lines[3]
