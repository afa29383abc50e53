"""Proof that a specimen was connected."""

from pathlib import Path

import pytest

from tests.measure.making import result_of
from tests.record.making import OWN_F, Case, program


@pytest.mark.parametrize(("farads", "ohms"), [(1e-9, 1e9), (1e-9, 1e12), (3e-9, 2e8)])
def test_the_ramp_gives_capacitance_and_resistance_apart(tmp_path: Path, farads: float, ohms: float) -> None:
    """I = C dV/dt + V / R (circuit theory): both terms come back from one ramp, the bench's own 500 pF taken off."""
    ramp = result_of(tmp_path, Case(farads=farads, ohms=ohms)).ramp
    assert ramp is not None
    assert ramp.rate_v_per_s == pytest.approx(2000.0, rel=1e-3)
    assert ramp.farads.value == pytest.approx(farads, abs=ramp.farads.expanded)
    assert ramp.farads.value == pytest.approx(farads, abs=2e-11)
    assert ramp.siemens.value == pytest.approx(1.0 / ohms, abs=4 * ramp.siemens.u + 1e-12)
    assert ramp.farads.u >= 0.2e-6 / 2000.0  # the current monitor's zero alone: 100 pF


def test_a_specimen_inside_the_declared_window_is_seen(tmp_path: Path) -> None:
    """1 nF inside 0.8 to 1.2 nF."""
    assert result_of(tmp_path).proof.seen


def test_a_lead_that_is_off_is_never_taken_for_a_specimen(tmp_path: Path) -> None:
    """Without a specimen nothing is seen, also where a careless window begins at zero."""
    for low in (0.8e-9, 0.0, -1e-9):
        proof = {"capacitance_f": [low, 1.2e-9], "current_a": None}
        result = result_of(tmp_path / str(low), Case(farads=0.0, ohms=1e15,
                                                     meta={"program": program(specimen_proof=proof)}))
        assert not result.proof.seen
        assert "no specimen seen" in result.proof.text
        assert result.verdict == "not decided"


def test_another_specimen_than_declared_is_not_the_one(tmp_path: Path) -> None:
    """5 nF where 0.8 to 1.2 nF was declared."""
    proof = result_of(tmp_path, Case(farads=5e-9)).proof
    assert not proof.seen
    assert "outside the declared" in proof.text


@pytest.mark.parametrize(("ohms", "seen"), [(1e9, True), (1e13, False), (1e8, False)])
def test_the_current_in_the_hold_can_be_the_proof(tmp_path: Path, ohms: float, seen: bool) -> None:
    """10 µA inside 5 to 20 µA proves it; nothing, or ten times as much, does not."""
    declared = program(specimen_proof={"capacitance_f": None, "current_a": [5e-6, 20e-6]})
    assert result_of(tmp_path, Case(ohms=ohms, meta={"program": declared})).proof.seen is seen


def test_both_windows_must_be_met_where_both_are_declared(tmp_path: Path) -> None:
    """The right capacitance with the wrong current is not the specimen that was declared."""
    declared = program(specimen_proof={"capacitance_f": [0.8e-9, 1.2e-9], "current_a": [20e-6, 30e-6]})
    proof = result_of(tmp_path, Case(meta={"program": declared})).proof
    assert not proof.seen
    assert "specimen seen: capacitance" in proof.text


def test_without_a_declared_window_nothing_is_proven(tmp_path: Path) -> None:
    """No window, no proof, no pass."""
    result = result_of(tmp_path, Case(meta={"program": program(specimen_proof=None)}))
    assert result.proof.text == "no specimen seen: the run sheet declares no window for it"
    assert result.verdict == "not decided"


def test_an_unknown_draw_of_the_bench_proves_nothing(tmp_path: Path) -> None:
    """Where nobody knows what the bench draws by itself, its current is not taken for a specimen's."""
    declared = program(specimen_proof={"capacitance_f": None, "current_a": [5e-6, 20e-6]})
    proof = result_of(tmp_path, Case(meta={"program": declared, "bench": {"own_f": OWN_F}})).proof
    assert not proof.seen
    assert "own draw is not known" in proof.text
