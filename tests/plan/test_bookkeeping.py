"""Preflight, the bookkeeping: labels, people, release, confirmations."""

from collections.abc import Callable
from dataclasses import replace
from datetime import date

import pytest

from hvhost.bench.model import Bench, GroundDevice
from hvhost.plan.language import read_plan
from hvhost.plan.plan import Plan, RunSheet
from hvhost.plan.preflight import History, preflight
from hvhost.plan.sheet import sheet_from
from hvhost.wire.vocabulary import Fitted
from hvhost.words.findings import Finding, Grade

STEPS = "- ramp: {to: 5 kV, rate: 1 kV/s}"
TODAY = date(2026, 12, 1)


@pytest.fixture
def look(plan_of: Callable[..., Plan], demo: Bench) -> Callable[..., tuple[Finding, ...]]:
    """Preflight of a plain plan with this sheet, history and bench."""
    def looked(typed: RunSheet, history: History | None = None, bench: Bench | None = None) -> tuple[Finding, ...]:
        return preflight(plan_of(STEPS), typed, bench or demo, history=history or History(), today=TODAY).findings
    return looked


Looked = Callable[..., tuple[Finding, ...]]


def test_a_used_label_asks(look: Looked, sheet: Callable[..., RunSheet]) -> None:
    """'repeat, or wrong label?' needs a reason; a sheet that says why it repeats leaves a note."""
    history = History(used_specimens=frozenset({"S-1"}), last_specimen="S-1", interlock_opened_since=False)
    (asked,) = look(sheet(), history)
    assert (asked.grade, asked.remedy, asked.line) == (Grade.REASON, "repeat, or wrong label?", 2)
    (noted,) = look(sheet("repeat_of: cable end cleaned"), history)
    assert noted.grade is Grade.NOTE
    assert "cable end cleaned" in noted.found


def test_a_new_label_without_an_opening_needs_a_reason(look: Looked, sheet: Callable[..., RunSheet]) -> None:
    """Nobody can have changed the specimen: wrong label or defeated interlock."""
    history = History(used_specimens=frozenset({"S-0"}), last_specimen="S-0", interlock_opened_since=False)
    (asked,) = look(sheet(), history)
    assert (asked.grade, asked.remedy) == (Grade.REASON, "wrong label or defeated interlock")
    assert look(sheet(), replace(history, interlock_opened_since=True)) == ()


def test_the_first_run_of_all_asks_nothing(look: Looked, sheet: Callable[..., RunSheet]) -> None:
    """With no run before there is nothing to compare with."""
    assert look(sheet(), History(interlock_opened_since=False)) == ()


def test_a_label_that_differs_only_in_writing_asks(look: Looked, sheet: Callable[..., RunSheet]) -> None:
    """'s 1' after 'S-1' is likely the same specimen."""
    (asked,) = look(sheet(specimen="s 1"), History(used_specimens=frozenset({"S-1"}), last_specimen="S-1"))
    assert (asked.grade, asked.remedy) == (Grade.REASON, "repeat, or wrong label?")


def test_a_plan_without_release_needs_a_reason(sheet: Callable[..., RunSheet], demo: Bench) -> None:
    """A plan is released by a named person, and not from tomorrow on."""
    for released, line in (("", 1), ("released: {by: tester, on: 2026-12-02}", 2)):
        plan, _ = read_plan("p.yaml", f"plan: x\n{released}\nsteps:\n{STEPS}\n")
        assert plan is not None
        (reason,) = preflight(plan, sheet(), demo, history=History(), today=TODAY).findings
        assert (reason.grade, reason.line) == (Grade.REASON, line)


def test_a_run_without_operator_needs_a_reason(look: Looked) -> None:
    """Somebody stands for the run."""
    (reason,) = look(sheet_from("s.yaml", "sheet: x\nspecimen: S-1\n"))
    assert (reason.grade, reason.what) == (Grade.REASON, "operator")


def test_polarity_that_is_not_the_benchs_is_refused(look: Looked) -> None:
    """The operator read another polarity off the supply than the bench file says."""
    typed = sheet_from("s.yaml", "sheet: x\nspecimen: S-1\noperator: t\nconfirmed: {polarity: negative}\n")
    (refusal,) = look(typed)
    assert (refusal.grade, refusal.line, refusal.what) == (Grade.REFUSE, 4, "confirmed.polarity")


def test_polarity_without_a_contact_is_confirmed_by_the_operator(look: Looked, demo: Bench) -> None:
    """Where no contact tells the polarity, the sheet does, or a reason."""
    bench = replace(demo, fitted=demo.fitted & ~Fitted.POLARITY)
    typed = sheet_from("s.yaml", "sheet: x\nspecimen: S-1\noperator: t\n")
    (reason,) = look(typed, bench=bench)
    assert (reason.grade, reason.what) == (Grade.REASON, "confirmed.polarity")


def test_without_a_grounding_contact_its_removal_is_confirmed(look: Looked, demo: Bench) -> None:
    """The bench cannot tell whether something still grounds the specimen."""
    typed = sheet_from("s.yaml", "sheet: x\nspecimen: S-1\noperator: t\n")
    (reason,) = look(typed, bench=replace(demo, ground=GroundDevice.NONE))
    assert (reason.grade, reason.what) == (Grade.REASON, "confirmed.ground_removed")


@pytest.mark.parametrize("key", ["ground_removed", "grounded_while_connecting", "area_clear"])
def test_a_no_is_a_no(key: str, look: Looked) -> None:
    """What the operator denies is refused with what to do."""
    typed = sheet_from("s.yaml", f"sheet: x\nspecimen: S-1\noperator: t\nconfirmed: {{{key}: no}}\n")
    (refusal,) = look(typed)
    assert (refusal.grade, refusal.found) == (Grade.REFUSE, "'no'")
    assert refusal.remedy


def test_a_calibration_that_ran_out_since_needs_a_reason(look: Looked, sheet: Callable[..., RunSheet],
                                                         demo: Bench) -> None:
    """The day after the last valid one, not the last valid one."""
    assert look(sheet(), bench=replace(demo, calibration_valid_until=TODAY)) == ()
    (reason,) = look(sheet(), bench=replace(demo, calibration_valid_until=date(2026, 11, 30)))
    assert (reason.grade, reason.what) == (Grade.REASON, "calibration.valid_until")


def test_acceptance_without_proof_is_noted(sheet: Callable[..., RunSheet], plan_of: Callable[..., Plan],
                                           demo: Bench) -> None:
    """No window, no pass: said before the run, not after."""
    plan = plan_of(STEPS, tail="acceptance: [{criterion: no breakdown}]")
    (note,) = preflight(plan, sheet(), demo, history=History()).findings
    assert (note.grade, note.what) == (Grade.NOTE, "connected")
    proof = "connected: {capacitance: {from: 100 pF, to: 1 nF}}"
    assert preflight(plan, sheet(proof), demo, history=History()).findings == ()


def test_a_breakdown_limit_without_a_ramp_until_breakdown_is_noted(sheet: Callable[..., RunSheet], demo: Bench,
                                                                   plan_of: Callable[..., Plan]) -> None:
    """Without a breakdown the criterion cannot be decided."""
    plan = plan_of(STEPS, tail="acceptance: [{criterion: breakdown above, limit: 5 kV}]")
    proof = "connected: {capacitance: {from: 100 pF, to: 1 nF}}"
    (note,) = preflight(plan, sheet(proof), demo, history=History()).findings
    assert (note.grade, note.what) == (Grade.NOTE, "acceptance")
