"""Plans from files: the examples in silence, the faulty ones with every fault in one go."""

from collections.abc import Callable
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.plan.language import check_plan, load_plan, plan_schema, read_plan
from hvhost.plan.plan import PlanHold, PlanRamp, PlanRepeat, PlanStaircase
from hvhost.plan.program import HoldClock, SpecimenKind, WhenOut
from hvhost.words.errors import FileFault
from hvhost.words.findings import Finding, Grade
from tests.plan.conftest import CONFIGS, FAULTY

FAULTY_PLANS = sorted((FAULTY / "plan").glob("*.yaml"))


def wanted(path: Path) -> list[tuple[int, str, str]]:
    """Read ``#! [line:] expected | found`` from the lines of a faulty file: (line, part of expected, part of found)."""
    rows = []
    for number, line in enumerate(path.read_bytes().decode("utf-8", "replace").split("\n"), start=1):
        for part in line.split("#!")[1:]:
            expected, _, found = part.strip().rpartition(" | ")
            head, colon, rest = expected.partition(": ")
            at, expected = (int(head), rest) if colon and head.isdigit() else (number, expected)
            rows.append((at, expected.strip(), found.strip()))
    return rows


def unmatched(rows: list[tuple[int, str, str]], findings: tuple[Finding, ...]) -> tuple[list[object], list[str]]:
    """Return the rows without a finding and the findings without a row."""
    left, missing = list(findings), []
    for line, expected, found in rows:
        hit = next((f for f in left if f.line == line and expected in f.expected and found in f.found), None)
        if hit is None:
            missing.append((line, expected, found))
        else:
            left.remove(hit)
    return missing, [finding.text for finding in left]


@pytest.mark.parametrize("path", FAULTY_PLANS, ids=lambda path: path.stem)
def test_every_fault_is_found_in_one_go(path: Path) -> None:
    """Each faulty plan gives exactly the findings that its lines announce, with line, expected and found."""
    findings = check_plan(path)
    assert wanted(path)
    assert unmatched(wanted(path), findings) == ([], [])
    assert all(finding.grade is Grade.REFUSE and finding.file == path.name for finding in findings)
    with pytest.raises(FileFault) as refused:
        load_plan(path)
    assert refused.value.findings == findings


def test_there_are_enough_kinds_of_fault() -> None:
    """At least twenty faulty files, more than sixty faults."""
    assert len(FAULTY_PLANS) >= 20
    assert sum(len(wanted(path)) for path in FAULTY_PLANS) > 60


@pytest.mark.parametrize("name", ["withstand", "leakage", "stepvoltage", "breakdown", "demo"])
def test_examples_check_in_silence(name: str) -> None:
    """Nothing is said of the example plans."""
    assert check_plan(CONFIGS / f"{name}.plan.yaml") == ()


def test_a_plan_is_kept_with_its_text_and_hash(tmp_path: Path) -> None:
    """The hash is the SHA-256 of the text as it stands in the file."""
    from hashlib import sha256

    path = CONFIGS / "withstand.plan.yaml"
    plan = load_plan(path)
    assert plan.sha256 == sha256(path.read_bytes()).hexdigest()
    assert plan.text == path.read_text(encoding="utf-8")
    assert plan.release is not None
    assert plan.release.by == "laboratory lead"


def test_steps_are_read_as_written(plan_of: Callable[..., object]) -> None:
    """Each kind of step carries what its keys say, with lines."""
    plan, findings = read_plan("t.yaml", """plan: every kind
specimen: self-restoring
arc: {reaction: pause, count: 5, rest: 2 s, window: 1 min}
retreat: {back: 2 kV, series: 3}
steps:
  - ramp: {name: up, to: 5 kV, duration: 10 s}
  - hold: {for: 60 s, at_most: 2 min, clock: accumulate, readings: [15 s, 60 s], guard_band: yes}
  - rest: 5 s
  - repeat:
      times: 3
      steps:
        - ramp: {to: 9 kV, rate: 1 kV/s, until: breakdown}
        - rest: 5 s
  - staircase: {from: 1 kV, to: 3 kV, step: 1 kV, for: 10 s, at_most: 15 s, when_out: restart}
""")
    assert findings == ()
    assert plan is not None
    ramp, hold, _, repeat, stairs = plan.steps
    assert isinstance(ramp, PlanRamp)
    assert (ramp.name, ramp.line, ramp.to.factor, ramp.rate) == ("up", 6, 5e3, None)
    assert isinstance(hold, PlanHold)
    assert (hold.terms.clock, hold.terms.guard_band) == (HoldClock.ACCUMULATE, True)
    assert [value.factor for value in hold.terms.readings] == [15.0, 60.0]
    assert isinstance(repeat, PlanRepeat)
    assert isinstance(repeat.steps[0], PlanRamp)
    assert repeat.steps[0].until_breakdown
    assert isinstance(stairs, PlanStaircase)
    assert stairs.terms.when_out is WhenOut.RESTART
    assert plan.specimen_kind is SpecimenKind.SELF_RESTORING
    assert plan.retreat is not None
    assert not plan.retreat.back_is_fraction


def test_an_unreadable_file_is_one_finding(tmp_path: Path) -> None:
    """A missing file is told like any other fault."""
    (finding,) = check_plan(tmp_path / "nowhere.yaml")
    assert finding.grade is Grade.REFUSE
    with pytest.raises(FileFault):
        load_plan(tmp_path / "nowhere.yaml")


def test_the_schema_names_the_steps() -> None:
    """The JSON Schema is that of a plan."""
    assert {"plan", "steps"} <= set(plan_schema()["required"])


LINES = st.lists(st.sampled_from([
    "plan: x", "steps:", "  - ramp: {to: 5 kV, rate: 1 kV/s}", "  - hold:", "      for: 60 s", "      at_most: u",
    "  - rest: 5 s", "  - repeat:", "      steps:", "        - ramp: 5", "retreat: {back: 5 %, series: 2}",
    "arc: pause", "arc: {reaction: pause}", "parameters:", "  u: {quantity: duration, from: 1 s, to: x}", "acceptance:",
    "  - criterion: level held", "  - 7", "limits: []", "released: {}", "specimen: *a", "  - {}", "\t", "steps: {}",
]), max_size=14)


@given(LINES)
def test_no_file_raises(lines: list[str]) -> None:
    """Any mixture of lines gives a plan or findings that refuse, never anything else."""
    plan, findings = read_plan("t.yaml", "\n".join(lines))
    assert (plan is None) == any(finding.grade is Grade.REFUSE for finding in findings)
