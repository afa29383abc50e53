"""``hvhost rehearse --fast``: one seed and one date decide every byte; faults show in the exit code."""

import json
from pathlib import Path

import pytest

from hvhost.cli import exits, rehearse
from hvhost.words.errors import UsageFault
from tests.cli.conftest import CONFIGS, Rehearsed, rehearsed_in


def test_a_sound_plan_passes(rehearsed: Rehearsed) -> None:
    """The exit code is the run's verdict; the truth file and the manifest are there."""
    assert rehearsed.code == exits.PASSED
    assert json.loads(rehearsed.truth.read_text().splitlines()[0])["seed"] == 5
    assert (rehearsed.folder / "manifest.sha256").exists()


def test_the_same_seed_gives_the_same_bytes(rehearsed: Rehearsed, tmp_path: Path) -> None:
    """Every file of the run but those that name a place is equal to the byte."""
    again = rehearsed_in(tmp_path)
    assert again.folder.name == rehearsed.folder.name
    for name in ("run.hvb", "result.json", "bench.yaml", "plan.yaml", "sheet.yaml"):
        assert (again.folder / name).read_bytes() == (rehearsed.folder / name).read_bytes(), name
    assert again.truth.read_bytes() == rehearsed.truth.read_bytes()


@pytest.mark.parametrize(("fault", "code"), [("lead-off", exits.NOT_DECIDED), ("arc@4kV", exits.TRIPPED)])
def test_a_fault_shows(tmp_path: Path, fault: str, code: int) -> None:
    """Without a specimen nothing is proven; an arc trips."""
    assert rehearsed_in(tmp_path, "--fault", fault).code == code


@pytest.mark.parametrize("words", [("--date", "3.2.2027"), ("--profile", "none"), ("--set", "x=1"),
                                   ("--fault", "none")])
def test_usage(tmp_path: Path, words: tuple[str, str]) -> None:
    """A date, profile, change or fault that is none is refused before anything runs."""
    with pytest.raises(UsageFault):
        rehearse.run([str(CONFIGS / "demo.bench.yaml"), str(CONFIGS / "demo.plan.yaml"), "--specimen", "S-1", "--fast",
                      "--runs", str(tmp_path), *words])
    assert not list(tmp_path.glob("*-*"))
