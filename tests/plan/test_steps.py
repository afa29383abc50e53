"""Steps read one by one, so that one fault hides no other."""

from hvhost.plan.plan import PlanGap, PlanRamp
from hvhost.plan.steps import Builder, build_steps, named
from hvhost.words.textfile import read_yaml


def build(text: str) -> tuple[Builder, tuple[object, ...]]:
    """Return the builder and the steps of a text."""
    root, _ = read_yaml("t.yaml", text)
    assert root is not None
    builder = Builder("t.yaml", root)
    return builder, build_steps(builder, ("steps",))


def test_places_count_from_one() -> None:
    """'steps.2.ramp' is the second step, as an engineer counts."""
    assert named(("steps", 1, "ramp")) == "steps.2.ramp"


def test_a_faulty_step_becomes_a_gap_between_good_ones() -> None:
    """The steps around a faulty one are built all the same."""
    _, steps = build("steps:\n- ramp: {to: 1 kV, rate: 1 kV/s}\n- ramp: {to: 1 KV, rate: 1 kV/s}\n"
                     "- ramp: {to: 2 kV, rate: 1 kV/s}\n")
    assert [type(step) for step in steps] == [PlanRamp, PlanGap, PlanRamp]


def test_values_carry_the_line_where_they_stand() -> None:
    """A step over several lines gives each value its own line."""
    _, (ramp,) = build("steps:\n- ramp:\n    to: 1 kV\n    rate: 1 kV/s\n")
    assert isinstance(ramp, PlanRamp)
    assert ramp.rate is not None
    assert (ramp.line, ramp.to.line, ramp.rate.line) == (2, 3, 4)


def test_two_kinds_in_one_step_are_told_with_the_remedy() -> None:
    """A forgotten dash is the usual cause."""
    builder, _ = build("steps:\n- ramp: {to: 1 kV, rate: 1 kV/s}\n  rest: 5 s\n")
    (finding,) = builder.findings
    assert finding.found == "ramp and rest"
    assert "'-'" in finding.remedy
