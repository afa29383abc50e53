"""The truth file: which lines are written, and that each is documented JSON."""

import json
import re

from hvhost.standin import truth
from hvhost.standin.truth import Levels, TruthLog

OFF: Levels = (1, 1, 0, 0, 0, 0, 0)
LIVE: Levels = (0, 0, 1, 1, 1, 4, 0)


def log() -> tuple[TruthLog, list[str]]:
    """A log that keeps its lines."""
    lines: list[str] = []
    return TruthLog(lines.append, tick_hz=10_000), lines


def test_idle_ticks_write_nothing() -> None:
    """Off and without voltage only the first state is a line."""
    made, lines = log()
    for tick in range(1000):
        made.state(tick, tick / 1e4, OFF, 0.0, 0.0, 0, 0)
    assert len(lines) == 1


def test_energised_writes_every_ten_milliseconds() -> None:
    """One second under power is a hundred lines and the first."""
    made, lines = log()
    for tick in range(0, 10_001, 10):
        made.state(tick, tick / 1e4, LIVE, 5e3, 1e-6, 100, 200)
    assert len(lines) == 101


def test_falling_voltage_is_followed_after_the_power_went() -> None:
    """Charge on the output is worth lines, whatever its sign."""
    made, lines = log()
    for tick in range(0, 1000, 10):
        made.state(tick, tick / 1e4, OFF, -31.0, 0.0, 0, 0)
    assert len(lines) == 10


def test_every_change_is_a_line_at_its_tick() -> None:
    """A cut is written at the tick it happened, not at the next ten milliseconds."""
    made, lines = log()
    made.state(100, 0.01, LIVE, 5e3, 1e-6, 100, 200)
    made.state(103, 0.0103, OFF, 5e3, 0.0, 0, 0)
    assert [json.loads(line)["tick"] for line in lines] == [100, 103]
    assert json.loads(lines[1])["inhibit"] == 1


def test_every_key_and_event_is_documented() -> None:
    """Each key that is written stands in the module's text."""
    made, lines = log()
    made.start(seed=7, profile="demo", tick_hz=10_000, faults=["lead-off"])
    made.state(1, 1e-4, LIVE, 5e3, 1e-6, 100, 200)
    made.event(2, 2e-4, "fault on", 1.0, "lead-off")
    for line in lines:
        assert line.endswith("\n")
        assert line.isascii()
        for key in json.loads(line):
            assert re.search(rf'"{key}"', truth.__doc__ or ""), key


def test_first_line_names_seed_profile_and_faults() -> None:
    """From the first line alone a run can be repeated."""
    made, lines = log()
    made.start(seed=7, profile="demo", tick_hz=10_000, faults=["lead-off@3s"])
    assert json.loads(lines[0]) == {"kind": "start", "seed": 7, "profile": "demo", "tick_hz": 10_000,
                                    "faults": ["lead-off@3s"]}
