"""One tiny setting for all measurements: a few blocks of a few calls; no figure is ever compared with a bound."""

from pathlib import Path

import pytest

from hvhost.speed.setting import Setting

BENCH = Path(__file__).parents[2] / "configs" / "demo.bench.yaml"


@pytest.fixture(scope="session")
def setting(tmp_path_factory: pytest.TempPathFactory) -> Setting:
    """Two blocks of five calls; the scene is caught once for all tests."""
    return Setting(bench=BENCH, folder=tmp_path_factory.mktemp("speed"), minutes=0.02, blocks=2, per_block=5)
