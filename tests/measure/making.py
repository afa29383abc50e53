"""Runs in memory for measures, by the same scripted bench that makes records."""

from pathlib import Path

from hvhost.measure.result import Result, evaluate
from hvhost.record.data import RunData, load_run
from tests.record.making import Case, made_run


def data_of(root: Path, case: Case | None = None) -> RunData:
    """Return a made run read back."""
    return load_run(made_run(root, case))


def result_of(root: Path, case: Case | None = None) -> Result:
    """Return what a made run tells."""
    return evaluate(data_of(root, case))
