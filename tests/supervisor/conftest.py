"""A bench in memory for each test that asks for one."""

from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest

from tests.supervisor.lab import Lab


@pytest.fixture
def lab_of(tmp_path: Path) -> Iterator[Callable[..., Lab]]:
    """Benches with options."""
    made: list[Lab] = []

    def make(**options: Any) -> Lab:
        made.append(Lab(tmp_path, **options))
        return made[-1]

    yield make
    for lab in made:
        lab.end()


@pytest.fixture
def lab(lab_of: Callable[..., Lab]) -> Lab:
    """The demonstration bench."""
    return lab_of()
