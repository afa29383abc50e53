"""The standard's tree of a supply: SOURce, OUTPut, MEASure, protection and its causes."""

from dataclasses import replace

import pytest

from hvhost.bench.model import Bench
from hvhost.publish.instrument.device import Device
from hvhost.publish.instrument.supply import MEASURE, OUTPUT, SOURCE
from hvhost.publish.snapshot import LinkState, Permission
from tests.publish.instrument.fakes import BENCH, DIRECT, PLAN, Client, Talk


def _numbers(texts: list[str]) -> list[int]:
    return [int(text.partition(",")[0]) for text in texts]


@pytest.fixture
def talk() -> Talk:
    """A fresh instrument."""
    return Talk()


@pytest.fixture
def holder(talk: Talk) -> Client:
    """A connection in control of it."""
    return talk.client().take_seat()


# ---------------------------------------------------------------- SOURce


@pytest.mark.parametrize(("header", "highest", "default"), [
    ("VOLT", 24e3, 0.0), ("CURR", 4e-3, 0.0), ("VOLT:SLEW", 5e3, 5e3), ("VOLT:LIM", 24e3, 24e3),
    ("CURR:LIM", 4e-3, 4e-3)])
def test_min_max_and_def_in_both_forms(holder: Client, header: str, highest: float, default: float) -> None:
    """MINimum, MAXimum and DEFault as a value and as a question, from the bench's ceilings."""
    assert float(holder.ask(f"{header}? MAX")) == highest
    assert float(holder.ask(f"{header}? DEF")) == default
    lowest = float(holder.ask(f"{header}? MIN"))
    for word, value in (("MAX", highest), ("MIN", lowest), ("DEF", default)):
        assert float(holder.ask(f"{header} {word};{header.split(':')[-1]}?")) == pytest.approx(value, rel=1e-6)
    assert holder.errors() == []


def test_a_set_point_beyond_the_ceiling_is_out_of_range_and_nothing_is_clipped(holder: Client) -> None:
    """-222, on both sides of the bound."""
    holder.write("VOLT 24KV")
    for text in ("VOLT 24.001KV", "VOLT -1", "CURR 4.001MA", "VOLT:SLEW 5.001KV/S", "VOLT:SLEW 0", "VOLT:LIM 25KV"):
        holder.write(text)
        assert _numbers(holder.errors()) == [-222], text
    assert holder.ask("VOLT?;CURR?") == "2.400000E+04;0.000000E+00"


def test_a_limit_narrows_what_may_be_programmed(holder: Client) -> None:
    """VOLTage:LIMit is the script's own ceiling, below the bench's."""
    holder.write("VOLT:LIM 6KV")
    assert holder.ask("VOLT? MAX") == "6.000000E+03"
    holder.write("VOLT 6.001KV")
    assert holder.error() == -222
    holder.write("VOLT 6KV;LIM 5KV")
    assert holder.error() == -113  # below VOLTage there is no LIMit from the root: the walk stands at the root
    holder.write("VOLT:LIM 5KV")
    assert holder.error() == -221


def test_units_belong_to_the_quantity(holder: Client) -> None:
    """MV is a millivolt, MA a milliampere; another quantity's unit is an invalid suffix."""
    assert holder.ask("VOLT 500 MV;VOLT?;:CURR 2MA;CURR?;:VOLT:SLEW 0.5 kv/s;SLEW?") == (
        "5.000000E-01;2.000000E-03;5.000000E+02")
    for text in ("VOLT 5 A", "CURR 1 MV", "VOLT:SLEW 5 V"):
        holder.write(text)
        assert holder.error() == -131


def test_protections_of_the_bench_are_told_and_cannot_be_switched_off(talk: Talk, holder: Client) -> None:
    """Levels come from the bench; the trip current in force is the picture's."""
    assert holder.ask("VOLT:PROT?;PROT:STAT?;LEV?") == "2.480000E+04;1;2.480000E+04"
    assert holder.ask("CURR:PROT:LEV?;STAT?") == "5.000000E-03;1"
    for text in ("VOLT:PROT 1KV", "VOLT:PROT:STAT OFF", "CURR:PROT:STAT 0"):
        holder.write(text)
        assert holder.error() == -113
    assert "lower" not in talk.bench.methods


# ---------------------------------------------------------------- OUTPut


def test_on_works_only_in_a_direct_run_that_was_armed_at_the_bench(talk: Talk, holder: Client) -> None:
    """Before the arm, before the press and in a plan run it is a settings conflict; after the press it is taken."""
    holder.write("VOLT 1KV;:CURR 1MA")
    for permission, run, why in ((Permission.IDLE, None, "no direct run is armed"),
                                 (Permission.REQUESTED, DIRECT, "waits for the press"),
                                 (Permission.RUNNING, PLAN, "no direct run is armed")):
        talk.bench.permission, talk.bench.run = permission, run
        talk.after(0.1)
        holder.write("OUTP ON")
        told = holder.errors()
        assert _numbers(told) == [-221]
        assert why in told[0]
    talk.bench.arm(Permission.RUNNING)
    talk.after(0.1)
    assert holder.ask("OUTP ON;*OPC?;:OUTP?") == "1;1"
    assert holder.errors() == []
    assert talk.bench.volts == 1e3


def test_a_press_alone_moves_nothing_that_was_stored(talk: Talk, holder: Client) -> None:
    """An energised direct run stands at zero until OUTPut ON; the query tells that it is energised."""
    holder.write("VOLT 1KV;:CURR 1MA")
    talk.bench.arm()
    talk.after(1.0)
    assert talk.bench.volts == 0.0
    assert holder.ask("OUTP?;:VOLT?") == "1;1.000000E+03"


@pytest.mark.parametrize(("permission", "answer"), [
    (Permission.IDLE, "0"), (Permission.REQUESTED, "0"), (Permission.WARNING, "0"), (Permission.RUNNING, "1"),
    (Permission.PAUSING, "1"), (Permission.LOWERING, "1")])
def test_the_output_is_on_as_long_as_it_may_be_energised(talk: Talk, permission: Permission, answer: str) -> None:
    """A pause will re-energise and a lowering is not over: both are on."""
    client = talk.client()
    talk.bench.permission, talk.bench.run = permission, PLAN
    shot = replace(talk.bench.picture(), now_s=talk.bench.now_s + 0.01)
    talk.device.take(shot)
    assert client.ask("OUTP?") == answer


@pytest.mark.parametrize("link", [LinkState.NONE, LinkState.LOST])
def test_an_output_that_is_not_known_is_never_told_off(talk: Talk, link: LinkState) -> None:
    """The standard's not-a-number, and the advice in the queue."""
    client = talk.client()
    talk.bench.link = link
    talk.after(0.1)
    assert client.ask("OUTP?") == "9.91E+37"
    assert client.errors() == ['-230,"Data corrupt or stale;output unknown: use the emergency switching off"']


def test_off_lowers_without_the_seat_and_is_over_when_the_bench_is_off(talk: Talk, holder: Client) -> None:
    """And the holder must acknowledge it."""
    other = talk.client()
    holder.write("VOLT 3KV;:CURR 1MA")
    talk.bench.arm()
    talk.after(0.1)
    assert holder.ask("OUTP ON;*OPC?") == "1"
    assert other.ask("OUTP OFF;*OPC?;:OUTP?") == "1;0"
    assert other.errors() == []
    assert talk.bench.volts == 0.0
    holder.write("OUTP ON")
    assert holder.errors() == ['-203,"Command protected;stopped by instrument 2"']


def test_abort_cuts_without_the_seat(talk: Talk) -> None:
    """'As quickly as possible' is a cut."""
    talk.client().write("ABORt")
    assert talk.bench.methods == ["cut"]


@pytest.mark.parametrize(("polarity", "word"), [(1, "NORM"), (-1, "INV")])
def test_polarity(talk: Talk, polarity: int, word: str) -> None:
    """Magnitudes everywhere; the direction is told here."""
    bench: Bench = replace(BENCH, polarity=polarity)
    talk.device.bench = bench
    assert talk.client().ask("OUTP:POL?") == word
    assert isinstance(talk.device, Device)


# ---------------------------------------------------------------- protection


def test_tripped_and_its_causes(talk: Talk) -> None:
    """Any cause is the output's; overvoltage and overcurrent are their channel's."""
    client = talk.client()
    assert client.ask("OUTP:PROT:TRIP?;CAUS?") == '0;""'
    for causes, answers in ((("overvoltage",), "1;1;0"), (("host: overcurrent", "interlock"), "1;0;1"),
                            (("interlock",), "1;0;0")):
        talk.bench.trip(*causes)
        talk.after(0.1)
        assert client.ask("OUTP:PROT:TRIP?;:VOLT:PROT:TRIP?;:CURR:PROT:TRIP?") == answers
        assert client.ask("OUTP:PROT:CAUS?") == ",".join(f'"{word}"' for word in causes)


def test_the_latch_is_cleared_only_by_naming_every_cause(talk: Talk, holder: Client) -> None:
    """No parameter -109, a word instead of a string -148, an unknown or incomplete set -221, the whole set clears."""
    talk.bench.trip("overcurrent", "interlock")
    talk.after(0.1)
    holder.errors()
    for text, number in (("OUTP:PROT:CLE", -109), ("OUTP:PROT:CLE overcurrent", -148),
                         ('OUTP:PROT:CLE "overload"', -221), ('OUTP:PROT:CLE "overcurrent"', -221)):
        holder.write(text)
        talk.after(0.3)
        assert _numbers(holder.errors()) == [number], text
        assert holder.ask("OUTP:PROT:TRIP?") == "1"
    holder.write("OUTP:PROT:CLE 'interlock',\"overcurrent\";TRIP?")
    talk.after(0.5)
    assert holder.read() == "0"
    assert holder.errors() == []


def test_a_reset_that_the_mcu_does_not_answer_ends_in_an_error(talk: Talk, holder: Client) -> None:
    """The wait is bounded."""
    talk.bench.trip("overcurrent")
    talk.after(0.1)
    holder.errors()
    holder.session.receive(b'OUTP:PROT:CLE "overcurrent"\n', talk.bench.now_s)
    holder.session.turn(talk.bench.now_s)
    talk.bench.replies.clear()
    talk.after(5.0)
    assert holder.errors() == ['-240,"Hardware error;the MCU did not answer"']


# ---------------------------------------------------------------- MEASure


def test_a_measurement_is_younger_than_its_question(talk: Talk, holder: Client) -> None:
    """Not the picture that lies there, but a block that began after the question came."""
    holder.write("VOLT 1KV;:CURR 1MA")
    talk.bench.arm()
    talk.after(0.1)
    holder.write("OUTP ON;*WAI;:MEAS:VOLT?;CURR?")
    talk.after(0.2)
    assert holder.answers == []
    talk.after(0.4)
    assert holder.answers == ["1.000000E+03;2.500000E-04"]
    holder.answers.clear()
    holder.write("MEAS:SCAL:VOLT:DC?")
    assert holder.answers == []
    talk.after(0.1)
    assert holder.answers == ["1.000000E+03"]


def test_voltage_and_current_of_one_line_are_of_the_same_block(talk: Talk) -> None:
    """They are asked for together; anything between them makes the second a question of its own."""
    client = talk.client()
    client.write("MEAS:VOLT?;CURR?")
    client.write("MEAS:VOLT?;*ESE?;CURR?")
    talk.after(0.1)
    assert client.answers == ["0.000000E+00;0.000000E+00"]
    talk.after(0.1)
    assert len(client.answers) == 1
    talk.after(0.1)
    assert len(client.answers) == 2


def test_a_reading_that_does_not_come_is_not_a_number(talk: Talk) -> None:
    """S13: nothing old is told as new; the error says why."""
    client = talk.client()
    talk.bench.reading_age_s = 0.6
    client.write("MEAS:CURR?")
    talk.after(1.5)
    assert client.answers == ["9.91E+37"]
    client.answers.clear()
    assert _numbers(client.errors()) == [-230]


def test_measuring_takes_no_parameters(talk: Talk) -> None:
    """Range and resolution are the bench's."""
    client = talk.client()
    client.write("MEAS:VOLT? 10")
    assert client.error() == -108


def test_every_command_says_what_it_does_and_who_may() -> None:
    """Whatever changes the bench needs the seat, whatever stops it does not ask for it."""
    for command in (*SOURCE, *OUTPUT, *MEASURE):
        assert command.does
        assert (command.act is None) or command.seat or command.stop is not None, command.pattern
