"""The sentences about danger say what they must and never what they must not (S0, S6)."""

import re

from hvhost.bench import cautions
from hvhost.bench.cautions import BEFORE_TOUCHING, CAUTIONS, NOT_A_SAFETY_DEVICE, discharge_caution

EVERY = [text for name, text in vars(cautions).items() if name.isupper() and isinstance(text, str)]


def test_the_acts_before_touching_in_their_order() -> None:
    """Switch off, secure, prove dead for d.c., discharge through the resistor, ground and leave it on (EN 50110-1)."""
    acts = ["switch off", "secure against reconnection", "prove dead", "rated for d.c.",
            "discharge through the resistor", "ground solidly", "leave the ground on while working"]
    places = [BEFORE_TOUCHING.index(act) for act in acts]
    assert places == sorted(places)


def test_never_says_safe() -> None:
    """No sentence calls a circuit safe, dead, off or discharged."""
    for text in EVERY:
        assert not re.search(r"\bsafe to\b|\bis safe\b|\bis dead\b|\bis off\b|\bis discharged\b", text), text


def test_claims_no_safety_device() -> None:
    """The program names contacts in the supply's power as what protects."""
    assert "not a safety device" in NOT_A_SAFETY_DEVICE
    assert "no safety integrity level" in NOT_A_SAFETY_DEVICE
    assert "contacts" in NOT_A_SAFETY_DEVICE
    assert len(set(CAUTIONS)) == len(CAUTIONS)


def test_after_a_cut() -> None:
    """The bleed times that passed, whether the voltage is measured, and always the caution."""
    assert discharge_caution(2.5, measured=True) == f"2.5 bleed times since the cut. {BEFORE_TOUCHING}"
    assert discharge_caution(9.0, measured=False).startswith("Voltage not measured here. 9.0 bleed times")


def test_countdown_fits() -> None:
    """The pause's warning names the seconds."""
    assert cautions.WILL_RE_ENERGISE.format(seconds=4.2) == "WILL RE-ENERGISE in 4 s"
