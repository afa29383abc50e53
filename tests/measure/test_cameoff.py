"""A specimen that came off while the voltage was on."""

from base64 import b64encode
from datetime import datetime
from pathlib import Path

import numpy as np
import pytest

from hvhost.bench.file import load_bench
from hvhost.cli.fast import FastRehearsal
from hvhost.cli.plantof import plant_of
from hvhost.measure.cameoff import fall_at_once
from tests.cli.conftest import CONFIGS

RATE = 4.0  # windows a second
T = np.arange(1, 121) / RATE
NOISE = np.random.default_rng(5).normal(0.0, 2e-9, len(T))


def stepped(before: float, after: float, at: int = 60) -> np.ndarray:
    """Means of a current that falls from one level to another inside window ``at``."""
    means = np.where(np.arange(len(T)) < at, before, after)
    means[at] = (before + after) / 2.0
    return means + NOISE


@pytest.mark.parametrize("after", [0.0, 12e-6, 15e-6])
@pytest.mark.parametrize("at", [3, 60, 115])
def test_a_step_down_that_stays_is_found(after: float, at: int) -> None:
    """18 µA fall to the bench's own draw inside one window, wherever that lies."""
    found = fall_at_once(stepped(18e-6, after, at))
    assert found is not None
    assert abs(found.at - at) <= 1
    assert found.before == pytest.approx(18e-6, rel=0.01)
    assert found.after == pytest.approx(after, abs=1e-7)


@pytest.mark.parametrize("means", [
    18e-6 + NOISE, np.zeros(len(T)) + NOISE, NOISE[:3],
    5e-6 + 60e-6 * T**-1.0 + NOISE,  # dielectric absorption, steep
    5e-6 + 40e-6 * np.exp(-T / 0.4) + NOISE,  # the tail of charging through a resistor
    stepped(15e-6, 18e-6), 10e-6 + 1e-6 * T + NOISE,  # a rise; a ramp over a resistance
    np.where((np.arange(len(T)) > 50) & (np.arange(len(T)) < 55), 30e-6, 18e-6) + NOISE,  # a burst that goes again
    np.where(np.arange(len(T)) == 50, 5e-6, 18e-6) + NOISE,  # a dip that comes back
], ids=["steady", "nothing", "short", "absorption", "charging", "rise", "ramp", "burst", "dip"])
def test_what_is_no_loss_is_not_taken_for_one(means: np.ndarray) -> None:
    """Noise, absorption, charging, bursts and dips leave a specimen connected."""
    assert fall_at_once(means) is None


@pytest.mark.parametrize(("when", "verdict"), [("", "pass"), ("lead-off@25s", "not decided"),
                                               ("lead-off@70s", "not decided"), ("lead-off@10s", "not decided")])
def test_a_lead_that_comes_off_in_the_run_is_no_pass(tmp_path: Path, when: str, verdict: str) -> None:
    """In the hold early and late, and in the second ramp: the capacitance of the first ramp does not vouch for it."""
    bench = load_bench(CONFIGS / "demo.bench.yaml")
    rehearsal = FastRehearsal(bench, plant_of(bench), seed=5, runs=tmp_path, day=datetime(2027, 2, 3),
                              faults=[when] if when else [])
    rehearsal.prepare()
    files = {kind: b64encode((CONFIGS / f"withstand.{kind}.yaml").read_bytes()).decode() for kind in ("plan", "sheet")}
    done = rehearsal.run({**files, "operator": "x", "reason": "x"}, 200.0)
    assert done.closed is not None
    assert done.closed.result.verdict.value == verdict
    if when:
        assert "fell at once" in done.closed.result.proof.text
