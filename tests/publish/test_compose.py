"""The picture of a real core: whole rehearsals in memory, looked at four times a virtual second."""

import json
from argparse import Namespace
from collections.abc import Callable
from datetime import UTC, datetime
from itertools import pairwise
from pathlib import Path
from typing import Any

import pytest

from hvhost.bench.file import load_bench
from hvhost.cli.fast import FastRehearsal
from hvhost.cli.plantof import plant_of
from hvhost.cli.run import request_of
from hvhost.publish.compose import voltage_text
from hvhost.publish.snapshot import COURSE_KEPT, EVIDENCE_KEPT, LinkState, Permission, Phase, Snapshot
from hvhost.publish.view import screen
from hvhost.publish.wording import View
from hvhost.standin.params import PROFILES
from hvhost.supervisor import states
from hvhost.supervisor.core import Core

CONFIGS = Path(__file__).resolve().parents[2] / "configs"
DAY = datetime(2026, 3, 1, 12, tzinfo=UTC)
LONGEST_S = 60.0


class Watching(FastRehearsal):
    """A rehearsal that keeps a snapshot of each look."""

    shots: list[Snapshot]

    def _look(self) -> bool:
        if not hasattr(self, "shots"):
            self.shots = []
        self.shots.append(self.station.snapshot())
        return super()._look()


def rehearsed(runs: Path, plan: str, profile: str, for_s: float = LONGEST_S) -> list[Snapshot]:
    """The snapshots of one example plan, cut after so many seconds."""
    bench = load_bench(CONFIGS / "demo.bench.yaml")
    options = Namespace(plan=str(CONFIGS / f"{plan}.plan.yaml"), sheet=str(CONFIGS / f"{plan}.sheet.yaml"), specimen="",
                        operator="bob", reason="a rehearsal", repeat_of="", value=[])
    rehearsal = Watching(bench, plant_of(bench, PROFILES[profile]()), seed=7, runs=runs, day=DAY)
    rehearsal.prepare()
    rehearsal.run(request_of(options), for_s)
    if rehearsal.closed is None:
        rehearsal.station.handle("cut", {}, "test")
        assert rehearsal.line.run(rehearsal._look, LONGEST_S)
    return rehearsal.shots


@pytest.fixture(scope="module")
def demo(tmp_path_factory: pytest.TempPathFactory) -> list[Snapshot]:
    """Ramp, hold, ramp until the specimen breaks down."""
    return rehearsed(tmp_path_factory.mktemp("demo"), "demo", "demo")


@pytest.fixture(scope="module")
def series(tmp_path_factory: pytest.TempPathFactory) -> list[Snapshot]:
    """The first breakdown of a gap, its pause and its retreat."""
    return rehearsed(tmp_path_factory.mktemp("series"), "breakdown", "gap", for_s=38.0)


def during(shots: list[Snapshot], wanted: Callable[[Snapshot], Any]) -> list[Snapshot]:
    """Those for which something holds; at least one does."""
    found = [shot for shot in shots if wanted(shot)]
    assert found
    return found


def test_the_open_request_is_whole(demo: list[Snapshot]) -> None:
    """Plan, specimen, voltage, duration, who asked, time left; a stand-in's press may be simulated."""
    shot = during(demo, lambda one: one.arm)[0]
    arm = shot.arm
    assert arm is not None
    assert (arm.plan, arm.volts_highest) == ("Demonstration, ramp, hold, ramp higher", 22e3)
    assert arm.specimen
    assert arm.asked_by == "rehearsal"
    assert 0.0 < arm.expires_s <= 30.0
    assert arm.press_needed
    assert arm.simulated_press
    assert shot.course[-1].volts == 0.0
    assert max(point.volts for point in shot.course) == 22e3


def test_the_course_shrinks_as_it_is_run_and_is_always_ahead(demo: list[Snapshot]) -> None:
    """It begins at the set-point in force, never lies in the past by more than a second, and its end comes nearer."""
    running = during(demo, lambda one: one.permission is Permission.RUNNING and one.course)
    assert all(one.course[0].t_s >= one.now_s - 1.05 for one in running)
    assert all(len(one.course) <= COURSE_KEPT for one in running)
    assert all(late.t_s >= early.t_s for one in running for early, late in pairwise(one.course))
    left = [one.run.expected_s for one in running if one.run and one.run.expected_s is not None]
    assert left[0] > left[-1]
    ramp = during(running, lambda one: one.phase is Phase.RAMP)
    assert all(abs(one.course[0].volts - one.set_volts) <= 4000.0 * 1.05 for one in ramp)


def test_the_hold_clock_is_the_plans(demo: list[Snapshot]) -> None:
    """It has not begun while the mean is outside, then counts to five seconds; the step's own time goes on."""
    holds = [one.run.hold for one in demo if one.phase is Phase.HOLD and one.run and one.run.hold]
    assert holds
    assert not holds[0].begun
    assert holds[-1].begun
    assert 4.0 <= holds[-1].elapsed_s <= 5.1
    assert all(one.required_s == 5.0 and one.volts == 10e3 and one.at_most_s == 10.0 for one in holds)
    assert holds[-1].step_s is not None
    assert holds[-1].step_s >= holds[-1].elapsed_s


def test_the_last_minute_is_finer_than_the_run_and_goes_out_once_a_second(demo: list[Snapshot]) -> None:
    """No bucket is older than a minute; between two seconds the very same tuple is handed on."""
    assert all(one.now_s - one.recent[0].t_s <= 61.2 for one in during(demo, lambda one: one.recent))
    for name in ("recent", "trend"):
        changes = sum(getattr(early, name) is not getattr(late, name) for early, late in pairwise(demo))
        assert changes <= (demo[-1].now_s - demo[0].now_s) / 0.99 + 1


def test_the_trip_leaves_its_snapshot(demo: list[Snapshot]) -> None:
    """The collapse at the converter's rate, with the cause, bounded, and high before and low after the trigger."""
    shot = during(demo, lambda one: one.evidence)[-1]
    evidence = shot.evidence
    assert evidence is not None
    assert (evidence.kind, evidence.text) == ("trip", "breakdown")
    assert 50 < len(evidence.points) <= EVIDENCE_KEPT
    assert evidence.points[0].v_max > 15e3
    assert evidence.points[-1].v_max < 5e3
    before = during(demo, lambda one: one.permission is Permission.RUNNING)
    assert all(one.evidence is None for one in before)


def test_after_the_trip_there_is_no_course_and_bleed_times_are_counted(demo: list[Snapshot]) -> None:
    """What is to come is nothing; since the cut bleed times pass and never go backwards."""
    after = during(demo, lambda one: one.latched and one.permission is Permission.IDLE)
    assert all(one.course == () for one in after)
    bleeds = [one.bleeds_passed for one in after if one.bleeds_passed is not None]
    assert bleeds == sorted(bleeds)
    assert 0.0 <= bleeds[0] < 1.0


def test_a_pause_tells_what_follows_it(series: list[Snapshot]) -> None:
    """The arc's snapshot, the seconds left, and the climb after them; the voltage's text does not say energised."""
    pausing = during(series, lambda one: one.permission is Permission.PAUSING and one.pause_s and one.course)
    for one in pausing:
        assert one.course[1].volts == 0.0
        assert one.course[1].t_s - one.course[0].t_s <= 8.1
    assert "energised" not in {one.voltage_text for one in pausing}
    assert any(one.evidence is not None and one.evidence.kind == "arc" for one in series)
    retreat = during(series, lambda one: one.phase is Phase.RETREAT and one.course)
    assert max(point.volts for point in retreat[0].course) == 20e3


def test_lowering_is_told_as_lowering() -> None:
    """Small but plain: while the output is lowered, or an arc is paused, nobody reads that it is energised."""
    core = Core(load_bench(CONFIGS / "demo.bench.yaml"), 0.0, lambda: 1)
    core.discharge.text = "output energised"
    texts = {}
    for permission in (states.Permission.HOLD, states.Permission.LOWERING, states.Permission.PAUSING):
        core.state = states.State(permission=permission, voltage=states.Voltage.PRESENT)
        texts[permission] = voltage_text(core)
    assert list(texts.values()) == ["output energised", "the output is being lowered",
                                    "inhibited after an arc, power stays on"]


@pytest.mark.parametrize("size", [(80, 24), (120, 40)])
def test_everything_that_was_composed_can_be_sent_and_drawn(demo: list[Snapshot], series: list[Snapshot],
                                                            size: tuple[int, int]) -> None:
    """Every snapshot of both runs survives the way to a screen."""
    for shot in [*demo, *series][::7]:
        there = Snapshot.from_json(json.loads(json.dumps(shot.to_json(), allow_nan=False)))
        assert there == shot
        assert len(screen(there, View(), *size)) == size[1]
        assert there.link is LinkState.GREETED
