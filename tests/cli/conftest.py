"""One run rehearsed under a virtual clock, for every test that needs a closed run."""

from dataclasses import dataclass
from pathlib import Path

import pytest

from hvhost.cli import rehearse

CONFIGS = Path(__file__).parents[2] / "configs"
PLAN = """\
plan: Short
released: {by: laboratory lead, on: 2026-01-12}
current_limit: 2 mA
steps:
  - ramp: {to: 5 kV, rate: 4 kV/s}
  - hold: {name: level, for: 1 s, at_most: 5 s, window: 200 ms}
acceptance:
  - criterion: no breakdown
"""


@dataclass(frozen=True)
class Rehearsed:
    """A closed run: its root, its folder, the code that the command gave, the truth file."""

    root: Path
    folder: Path
    code: int
    truth: Path
    plan: Path


def rehearsed_in(root: Path, *more: str) -> Rehearsed:
    """Rehearse the short plan on the demonstration bench, the same bytes each time."""
    root.mkdir(parents=True, exist_ok=True)
    plan, truth = root / "plan.yaml", root / "truth.jsonl"
    plan.write_text(PLAN, encoding="utf-8")
    code = rehearse.run([str(CONFIGS / "demo.bench.yaml"), str(plan), "--sheet", str(CONFIGS / "demo.sheet.yaml"),
                         "--fast", "--seed", "5", "--date", "2027-02-03", "--runs", str(root / "runs"), "--quiet",
                         "--json", "--truth", str(truth), *more])
    folder = next((root / "runs").glob("*-*"))
    return Rehearsed(root=root / "runs", folder=folder, code=code, truth=truth, plan=plan)


@pytest.fixture(scope="session")
def rehearsed(tmp_path_factory: pytest.TempPathFactory) -> Rehearsed:
    """The run that passes; tests look at it and leave it as it is."""
    return rehearsed_in(tmp_path_factory.mktemp("rehearsed"))
