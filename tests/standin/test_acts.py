"""One-line commands to a stand-in."""

import json

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.standin.acts import ACTS, Quit, act, act_lines
from hvhost.standin.params import demo
from hvhost.standin.plant import Plant
from hvhost.wire.vocabulary import Inputs


class Mcu:
    """An MCU at rest."""

    tick, state, latched, v_word, i_word = 7, 0, 0, 0, 0


class Table:
    """A plant and an MCU on the table."""

    def __init__(self) -> None:
        self.plant, self.mcu = Plant(demo(), 1), Mcu()


def test_press_presses_for_so_long() -> None:
    """The arm input is down during the press and up after it."""
    table = Table()
    assert act(table, "press 0.4") == "ok pressed for 0.4 s"
    table.plant.advance(0.2, 0.0, 0.0)
    assert table.plant.inputs() & Inputs.ARM_INPUT
    table.plant.advance(0.3, 0.0, 0.0)
    assert not table.plant.inputs() & Inputs.ARM_INPUT


@pytest.mark.parametrize(("line", "bit"), [
    ("interlock open", Inputs.INTERLOCK), ("emergency", Inputs.EMERGENCY), ("ground", Inputs.GROUND_OPEN),
    ("fault on auxiliary-low", Inputs.AUXILIARY)])
def test_act_shows_at_the_inputs(line: str, bit: Inputs) -> None:
    """Each act takes its input away."""
    table = Table()
    assert table.plant.inputs() & bit
    assert act(table, line).startswith("ok")
    table.plant.advance(1e-3, 0.0, 0.0)
    assert not table.plant.inputs() & bit


def test_interlock_needs_the_reset_outside() -> None:
    """The answer says whether the contactor held."""
    table = Table()
    act(table, "interlock open")
    table.plant.advance(0.1, 0.0, 0.0)
    assert act(table, "reset-outside").startswith("error")
    act(table, "interlock close")
    assert act(table, "reset-outside") == "ok contactor held"


def test_faults_go_on_and_off_now_or_later() -> None:
    """A time counts from now, a value is a quantity."""
    table = Table()
    table.plant.advance(5.0, 0.0, 0.0)
    assert act(table, "fault on panel-v=5 kV") == "ok panel-v on"
    assert table.plant.faults.active["panel-v"] == 5e3
    assert act(table, "fault on lead-off@1s+1s") == "ok lead-off planned"
    table.plant.advance(1.5, 0.0, 0.0)
    assert "lead-off" in table.plant.faults.active
    table.plant.advance(1.0, 0.0, 0.0)
    assert "lead-off" not in table.plant.faults.active
    assert act(table, "fault off panel-v") == "ok panel-v off"
    assert table.plant.faults.active == {}


def test_faults_to_come_are_bounded() -> None:
    """Nobody fills the memory with planned faults."""
    table = Table()
    answers = [act(table, "fault on arc@9s") for _ in range(300)]
    assert answers[-1].startswith("error fault: expected at most")


def test_status_is_json() -> None:
    """True values on one line."""
    table = Table()
    told = json.loads(act(table, "status").removeprefix("ok "))
    assert told["tick"] == 7
    assert told["power"] is False


def test_mcu_reset_is_a_fault_that_happens_once() -> None:
    """The board that owns the MCU takes it."""
    table = Table()
    act(table, "mcu-reset")
    assert table.plant.faults.take("mcu-reset") == 1.0


def test_quit_quits() -> None:
    """The server is told."""
    with pytest.raises(Quit):
        act(Table(), "quit")


@pytest.mark.parametrize("line", ["", "fly", "press x", "press -1", "press 1e9", "interlock", "interlock ajar",
                                  "fault", "fault on", "fault on gremlin", "fault off gremlin", "emergency now",
                                  "status please", "ground on off", "fault on panel-v=5"])
def test_wrong_line_is_refused_and_does_nothing(line: str) -> None:
    """The answer says what was expected; the bench is as it was."""
    table = Table()
    before = table.plant.inputs()
    assert act(table, line).startswith("error ")
    assert table.plant.inputs() == before
    assert table.plant.faults.active == {}


@given(st.text(max_size=60).filter(lambda text: text.split()[:1] != ["quit"]))
def test_any_text_gets_one_answer_line(text: str) -> None:
    """Any text yields ok or error on one line."""
    answer = act(Table(), text)
    assert answer.startswith(("ok", "error "))
    assert "\n" not in answer


def test_every_act_has_its_line() -> None:
    """Help lists each command with what follows it."""
    assert len(act_lines()) == len(ACTS)
    assert all(line.strip().startswith(name) for line, name in zip(act_lines(), ACTS, strict=True))
