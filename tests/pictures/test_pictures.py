"""The pictures: every state at every size fits, uses the words of the trade, and is read without colour."""

import os
import re
import subprocess
import sys
from pathlib import Path

import pytest
from rich.cells import cell_len
from rich.style import Style

from hvhost.publish.snapshot import LinkState, Permission, Phase, VoltageState
from tests.pictures.draw import PAGES, SIZES, lines_of, svg_of, without_colour
from tests.pictures.states import STATES

# What must be read in a state, at every size: the words of PROTOCOL.md's states and of the S-rules.
LABELS: dict[str, tuple[str, ...]] = {
    "idle": (" IDLE ", "BELOW THRESHOLD", "Before touching"),
    "requested": (" REQUESTED ", "PRESS THE ARM INPUT AT THE BENCH within 27 s", "withstand.yaml", "S-1042",
                  "highest 18.00 kV", "2:26", "asked by bob"),
    "requested without arm input": ("type 'withstand S-1042' to arm", "no arm input"),
    "proving": (" PROVING ",),
    "warning": (" WARNING ", "WARNING: energises in 3 s"),
    "minute": (" RUNNING: HOLD ", "last 1:00"),
    "hold waits": ("HOLD 0:00 of 1:00 clock waits for ±1 % of 18.00 kV, restarted 2x",),
    "arc while running": (" RUNNING: HOLD ", "last arc"),
    "bell silent": ("b: bell silent",),
    "stopped by another": ("stopped by alice (pid 88), not acknowledged",),
    "ascii only": (" RUNNING: HOLD ", "HOLD 0:42 of 1:00", "(17.996 +- 0.052) kV"),
    "ramp": (" RUNNING: RAMP ", "ramp to 18.00 kV at 500 V/s"),
    "hold": (" RUNNING: HOLD ", "VOLTAGE PRESENT", "HOLD 0:42 of 1:00", "next reading in 13 s", "0:38 to go"),
    "hold out of tolerance": ("OUT OF ±1 % of 18.00 kV: clock stands",),
    "retreat": (" RUNNING: RETREAT ", "arcs 3 of 10"),
    "rest": (" RUNNING: REST ",),
    "pausing": (" PAUSING ", "WILL RE-ENERGISE in 7 s", "clock stands: arc pause"),
    "lowering": (" LOWERING ",),
    "tripped": (" TRIPPED ", "TRIPPED: breakdown", "VOLTAGE FALLING", "3.4 bleed times since the cut", "verdict: fail",
                "last trip", "cut confirmed", "Before touching", "hvhost reset breakdown"),
    "falling": ("VOLTAGE FALLING", "Before touching"),
    "below threshold": ("VOLTAGE BELOW THRESHOLD", "Before touching"),
    "not measured here": ("VOLTAGE NOT MEASURED HERE", "14.2 bleed times", "Before touching"),
    "measurement lost": ("VOLTAGE MEASUREMENT LOST", "Before touching"),
    "grounded": ("VOLTAGE GROUNDED", "not a proof", "hinders arming"),
    "unknown": ("VOLTAGE UNKNOWN", "LINK NONE", "OUTPUT UNKNOWN - USE THE EMERGENCY SWITCHING OFF"),
    "observe only": ("LINK OBSERVE ONLY", "settings differ"),
    "lost": ("LINK LOST", "LAST KNOWN: RUNNING: HOLD", "OUTPUT UNKNOWN - USE THE EMERGENCY SWITCHING OFF", "??"),
    "old reading": ("OLD READING, age 0.21 s", "▒"),
    "cut not confirmed": ("CUT NOT CONFIRMED: USE THE EMERGENCY SWITCHING OFF",),
    "wiring does not inhibit": ("does not inhibit when the MCU is absent",),
    "programming only": ("PROGRAMMED TO ZERO, SUPPLY STILL POWERED",),
    "negative bench": ("negative (-)", "-3.998", "-4.000 kV"),
    "rehearsal": ("REHEARSAL",),
    "interlock open": ("interlock open", "hinders arming", "close the interlock"),
    "record failed": ("RECORD FAILED: no space left",),
    "daemon gone": ("DAEMON GONE", "OUTPUT UNKNOWN", "CANNOT STOP NOW"),
    "view cannot stop": ("THIS VIEW CANNOT STOP",),
    "key pressed": ("cut sent by this key: cut 12 sent", "cut sent"),
}


def text_of(state: str, size: tuple[int, int]) -> str:
    """Return the picture as text, lines joined so that wrapped words can be found."""
    return "\n".join(line.plain for line in lines_of(state, *size))


@pytest.mark.parametrize("page", PAGES)
@pytest.mark.parametrize("size", SIZES)
def test_nothing_overflows(size: tuple[int, int], page: str) -> None:
    """Each picture has exactly its lines, each within its width."""
    for state in STATES:
        lines = lines_of(state, *size, PAGES[page])
        assert len(lines) == size[1]
        assert max(cell_len(line.plain) for line in lines) <= size[0]


@pytest.mark.parametrize("size", SIZES)
@pytest.mark.parametrize("state", STATES)
def test_every_state_is_read_from_its_words(state: str, size: tuple[int, int]) -> None:
    """What a state means stands there in text: no style is looked at here."""
    text = " ".join(text_of(state, size).split())
    for label in LABELS[state]:
        assert " ".join(label.split()) in text


def test_every_word_of_the_state_has_a_picture() -> None:
    """Each permission, phase, link and voltage that can be shown is shown by some picture."""
    snapshots = [snapshot for snapshot, _ in STATES.values()]
    assert {one.permission for one in snapshots} == set(Permission)
    assert {one.phase for one in snapshots} == set(Phase)
    assert {one.link for one in snapshots} == set(LinkState)
    assert {one.voltage for one in snapshots} == set(VoltageState)


@pytest.mark.parametrize("state", STATES)
def test_no_picture_claims_safety_or_off(state: str) -> None:
    """S6: nothing is called safe, dead or off; 'switch off' is an instruction."""
    for page in PAGES.values():
        text = " ".join(" ".join(line.plain for line in lines_of(state, 120, 40, page)).lower().split())
        text = text.replace("switch off", "").replace("switching off", "").replace("prove dead", "")
        assert not re.search(r"\b(safe|dead|off|discharged|earthed)\b", text)


@pytest.mark.parametrize("state", STATES)
def test_there_is_no_green(state: str) -> None:
    """S0: no green state, and colour only where words say the same: red alerts, yellow for an old reading."""
    for line in [line for page in PAGES.values() for line in lines_of(state, 120, 40, page)]:
        for style in [line.style, *(span.style for span in line.spans)]:
            parsed = style if isinstance(style, Style) else Style.parse(style or "")
            names = {color.name for color in (parsed.color, parsed.bgcolor) if color is not None}
            assert names <= {"white", "red", "yellow"}
            if "red" in names:
                assert line.plain.startswith((" ## ", "    ")) or "CANNOT STOP" in line.plain


def test_old_and_fresh_differ_without_colour() -> None:
    """The same reading, fresh and old, gives different text."""
    fresh, old = text_of("hold", (80, 24)), text_of("old reading", (80, 24))
    assert "▒" not in fresh
    assert "▒" in old


@pytest.mark.parametrize("state", STATES)
def test_inputs_are_named_at_every_size(state: str) -> None:
    """Every interlock's name is read, from 80x24 up."""
    snapshot, _ = STATES[state]
    text = " ".join(text_of(state, (80, 24)).split())
    for one in snapshot.inputs:
        assert one.name in text


def test_without_colour_the_same_is_read() -> None:
    """A picture without colour holds the same words; what was red is reversed or capitals still."""
    bare = svg_of("tripped", 80, 24, colour=False)
    assert "TRIPPED" in bare
    for line in lines_of("tripped", 80, 24):
        plain = without_colour(line)
        assert plain.plain == line.plain
        assert not {style.color for style in [plain.style, *(one.style for one in plain.spans)] if style} - {None}


def test_a_picture_is_an_svg() -> None:
    """The picture holds the text, for whoever looks and for whoever searches."""
    svg = svg_of("tripped", 80, 24)
    assert svg.startswith("<svg")
    assert "TRIPPED" in svg


def test_the_command_draws_what_is_asked(tmp_path: Path) -> None:
    """``python -m tests.pictures OUTDIR --size 80x24`` writes one file a state."""
    root = Path(__file__).resolve().parents[2]
    chosen = ["--size", "80x24", "--state", "hold", "--state", "idle", "--page", "screen", "--no-colour"]
    done = subprocess.run([sys.executable, "-m", "tests.pictures", str(tmp_path), *chosen], cwd=root,
                          capture_output=True, text=True, timeout=120, check=True)
    assert sorted(os.listdir(tmp_path)) == ["screen-hold-80x24.svg", "screen-idle-80x24.svg"]
    assert "2 pictures" in done.stdout
