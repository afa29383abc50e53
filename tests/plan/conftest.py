"""The two example benches, and plans and sheets from a few lines of text."""

from collections.abc import Callable
from pathlib import Path

import pytest

from hvhost.bench.file import load_bench
from hvhost.bench.model import Bench
from hvhost.plan.language import read_plan
from hvhost.plan.plan import Plan, RunSheet
from hvhost.plan.sheet import sheet_from
from hvhost.words.findings import Finding

CONFIGS = Path(__file__).parents[2] / "configs"
FAULTY = Path(__file__).parents[1] / "faulty"


@pytest.fixture(scope="session")
def demo() -> Bench:
    """0-25 kV, 4 mA, ceilings 24 kV and 5 kV/s."""
    return load_bench(CONFIGS / "demo.bench.yaml")


@pytest.fixture(scope="session")
def small() -> Bench:
    """5 kV, 20 mA, negative, 12-bit converters, ceilings 4.8 kV and 2 kV/s."""
    return load_bench(CONFIGS / "small.bench.yaml")


def _plan(steps: str, head: str = "", tail: str = "") -> Plan:
    text = f"plan: test\nreleased: {{by: tester, on: 2026-01-01}}\n{head}\nsteps:\n{steps}\n{tail}\n"
    plan, findings = read_plan("test.yaml", text)
    assert plan is not None, [f.text for f in findings]
    return plan


@pytest.fixture
def plan_of() -> Callable[..., Plan]:
    """A plan from its steps, with lines for its head and its end; it must be without faults."""
    return _plan


@pytest.fixture
def faults_of() -> Callable[[str], tuple[Finding, ...]]:
    """The findings of a plan's text."""
    return lambda text: read_plan("test.yaml", text)[1]


def _sheet(more: str = "", specimen: str = "S-1") -> RunSheet:
    text = (f"sheet: test\nspecimen: {specimen}\noperator: tester\n"
            f"confirmed: {{polarity: positive, ground_removed: yes}}\n{more}\n")
    return sheet_from("sheet.yaml", text)


@pytest.fixture
def sheet() -> Callable[..., RunSheet]:
    """A run sheet with further lines."""
    return _sheet
