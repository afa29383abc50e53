"""The whole picture at any size and with any content."""

from dataclasses import replace

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from rich.cells import cell_len

from hvhost.bench import cautions
from hvhost.publish import wording
from hvhost.publish.snapshot import EventLine, InputView, Reading, RunView, Severity, VoltageState
from hvhost.publish.view import fitted, screen
from hvhost.publish.wording import View
from tests.pictures.draw import ZONE
from tests.pictures.states import RUNNING, STATES, TRIPPED

WORDS = st.text(max_size=120)


@given(st.sampled_from(sorted(STATES)), st.integers(20, 260), st.integers(3, 90))
@settings(max_examples=60)
def test_every_state_fits_every_terminal(state: str, width: int, height: int) -> None:
    """Exactly ``height`` lines, none wider than ``width``, whatever the size."""
    snapshot, view = STATES[state]
    lines = screen(snapshot, view, width, height)
    assert len(lines) == height
    assert all(cell_len(line.plain) <= width for line in lines)


@given(WORDS, WORDS, WORDS, st.sampled_from([(80, 24), (120, 40)]))
@settings(max_examples=60)
def test_no_text_breaks_the_picture(first: str, second: str, third: str, size: tuple[int, int]) -> None:
    """Any text in any free field, wide characters and control characters too, stays in its place."""
    snapshot = replace(
        TRIPPED, bench_title=first, voltage_text=second, seat=third, verdict_text=first, latched=(second, third),
        run=RunView(run_id=first, plan=second, specimen=third, step_text=first, step_total=3, folder=second),
        inputs=(InputView(name=first, state=second),) * 9, next_acts=(third,) * 4, power_words=second,
        events=(EventLine(utc_ns=0, text=third, severity=Severity.TRIP),) * 50, discharge_text=first)
    lines = screen(snapshot, View(note=third, zone=ZONE), *size)
    assert len(lines) == size[1]
    assert all(cell_len(line.plain) <= size[0] for line in lines)
    assert all(line.plain.isprintable() for line in lines)


@given(st.floats(), st.floats(), st.floats(allow_nan=False), st.sampled_from([1, -1]))
@settings(max_examples=60)
def test_no_number_breaks_the_picture(volts: float, amps: float, full: float, polarity: int) -> None:
    """Any reading on any scale is drawn."""
    snapshot = replace(RUNNING, reading=Reading(volts=volts, amps=amps, age_s=0.01), volts_full=full, amps_full=full,
                       ceiling_volts=full, polarity=polarity)
    lines = screen(snapshot, View(zone=ZONE), 80, 24)
    assert all(cell_len(line.plain) <= 80 for line in lines)


@pytest.mark.parametrize("size", [(80, 24), (100, 30), (120, 40), (200, 60)])
def test_the_first_lines_and_the_last_stay_where_they_are(size: tuple[int, int]) -> None:
    """Header first, state second, keys last: the eye knows where to look, whatever the state."""
    for snapshot, view in STATES.values():
        lines = [line.plain for line in screen(snapshot, replace(view, zone=ZONE), *size)]
        assert "(+)" in lines[0] or "(-)" in lines[0]
        assert "14:03:22 +01:00 CET" in lines[0]
        assert "VOLTAGE" in lines[1]
        assert "cut" in lines[-1] or "CANNOT STOP" in lines[-1]


def test_a_small_terminal_keeps_the_alert_and_the_keys() -> None:
    """Below 80x24 the weightiest words and the stop keys remain."""
    snapshot, view = STATES["pausing"]
    lines = [line.plain for line in screen(snapshot, view, 50, 8)]
    assert "WILL RE-ENERGISE" in lines[0]
    assert "SPACE: cut" in lines[-1]


@pytest.mark.parametrize("state", [name for name, (one, _) in STATES.items() if one.run and one.run.hold])
@pytest.mark.parametrize("size", [(80, 24), (90, 26), (110, 32), (120, 40)])
def test_readings_state_clock_alerts_and_keys_are_always_there(state: str, size: tuple[int, int]) -> None:
    """Whatever gives way at a size, an engineer still reads these."""
    snapshot, view = STATES[state]
    lines = [line.plain for line in screen(snapshot, replace(view, zone=ZONE), *size)]
    text = "\n".join(lines)
    age = "none younger" if wording.output_unknown(snapshot, view) else " age "
    for part in ("HOLD 0:", "VOLTAGE", age, "next:" if not view.note else view.note):
        assert part in text
    assert "cut" in lines[-1] or "CANNOT STOP" in lines[-1]
    for alert in wording.alerts(wording.as_last_known(snapshot, view), view):
        assert alert.split(":")[0] in text


@pytest.mark.parametrize("state", STATES)
def test_nothing_that_matters_is_clipped_at_80_columns(state: str) -> None:
    """No line but an event's ends in an ellipsis: texts are folded or said more shortly."""
    snapshot, view = STATES[state]
    lines = [line.plain for line in screen(snapshot, replace(view, zone=ZONE), 80, 24)]
    assert not [line for line in lines if line.rstrip().endswith("…") and not line[1:3].isdigit()]


@pytest.mark.parametrize("state", STATES)
def test_ascii_is_ascii(state: str) -> None:
    """A terminal that draws nothing else gets nothing else, at exactly the same size."""
    snapshot, view = STATES[state]
    lines = screen(snapshot, replace(view, ascii_only=True, zone=ZONE), 80, 24)
    assert all(line.plain.isascii() for line in lines)
    assert all(line.cell_len <= 80 for line in lines)
    assert len(lines) == 24


def test_a_clipped_line_shows_that_it_is() -> None:
    """Text that does not fit ends in an ellipsis."""
    from rich.text import Text
    (line,) = fitted([Text("abcdefgh")], 5, 1)
    assert line.plain == "abcd…"


def test_the_caution_is_never_clipped() -> None:
    """S6: with a long reason at 80x24 the caution's last word is still read."""
    snapshot = replace(TRIPPED, voltage=VoltageState.LOST, bench_title="A bench with a very long name, area 3, 4 mA",
                       voltage_text="measurement lost: the reading fell faster than any discharge through the bleed",
                       power_words="supply power cut by the relay")
    lines = [line.plain for line in screen(snapshot, View(zone=ZONE), 80, 24)]
    text = " ".join(" ".join(lines).split())
    assert cautions.BEFORE_TOUCHING in text
    assert "Voltage measurement lost: the reading fell faster" in text
    assert "14:03:22 +01:00 CET" in lines[0]
    assert "MEASUREMENT LOST · cut confirmed" in lines[1]
