"""The rehearsal under a virtual clock, driven from Python."""

from datetime import datetime
from pathlib import Path

import pytest

from hvhost.bench.file import load_bench
from hvhost.cli.fast import FastRehearsal
from hvhost.cli.plantof import plant_of
from hvhost.words.errors import HvhostError
from tests.cli.conftest import CONFIGS

DAY = datetime(2027, 2, 3)


def test_prepare_greets_and_clears_the_boot_s_latch(tmp_path: Path) -> None:
    """After it the bench is greeted, unlatched and idle."""
    bench = load_bench(CONFIGS / "demo.bench.yaml")
    rehearsal = FastRehearsal(bench, plant_of(bench), seed=1, runs=tmp_path, day=DAY)
    rehearsal.prepare()
    status = rehearsal.station.handle("status", {}, "test")
    assert status["snapshot"]["link"] == "greeted"
    assert not status["snapshot"]["latched"]
    assert status["obstacles"] == []


def test_a_mute_board_is_refused(tmp_path: Path) -> None:
    """A stand-in that does not answer is told after ten virtual seconds."""
    bench = load_bench(CONFIGS / "demo.bench.yaml")
    rehearsal = FastRehearsal(bench, plant_of(bench), seed=1, runs=tmp_path, day=DAY, faults=["mute"])
    with pytest.raises(HvhostError, match="a greeted stand-in"):
        rehearsal.prepare()


@pytest.mark.parametrize(("fine", "blind"), [("powered_after_cut: yes", "powered_after_cut: no"),
                                             ("measured_at: specimen", "measured_at: supply")])
def test_prepare_waits_and_grounds_where_no_reading_tells_the_discharge(tmp_path: Path, fine: str, blind: str) -> None:
    """Such a bench is rehearsed too: bleed times pass, 'grounded by hand' is declared, the latch is gone."""
    text = (CONFIGS / "demo.bench.yaml").read_text(encoding="utf-8")
    file = tmp_path / "blind.yaml"
    file.write_text(text.replace(fine, blind), encoding="utf-8")
    bench = load_bench(file)
    rehearsal = FastRehearsal(bench, plant_of(bench), seed=1, runs=tmp_path, day=DAY)
    rehearsal.prepare()
    assert rehearsal.station.handle("status", {}, "test")["obstacles"] == []
    assert rehearsal.clock.elapsed_ns >= bench.bleed_s * bench.bleeds * 1e9
