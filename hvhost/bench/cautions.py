"""The sentences about danger, in one place: README, screens, records and reports all say the same.

The program never says that a circuit is safe to touch (S6).
"""

PERSONS = "For electrically skilled or instructed persons only, under the local safety code for test stations."
NOT_A_SAFETY_DEVICE = (
    "This program is not a safety device and claims no safety integrity level: the interlock loop and the emergency "
    "switching off must break the supply's power by contacts, without MCU or PC."
)
LATCHES_OPEN = (
    "Closing the interlock restores nothing: the hard-wired circuit stays open until a manual reset outside the danger "
    "zone, in view of it."
)
DANGER_SIGNAL = "The red danger signal is fed from the supply's power contact; a dark signal proves nothing."
BEFORE_TOUCHING = (
    "Before touching: switch off, secure against reconnection, prove dead with a means rated for d.c., discharge "
    "through the resistor, then ground solidly and leave the ground on while working."
)
SET_TO_ZERO = "Set to zero is not discharged: output, cable and specimen hold their charge."
ABSORPTION = "A discharged specimen can charge itself again (dielectric absorption): keep it grounded."
GROUNDED_IS_A_CONTACT = "'Grounded' is the position of a contact, not proof."

BELOW_THRESHOLD = "below threshold"
NOT_MEASURED = "not measured here"
MEASUREMENT_LOST = "measurement lost"
OUTPUT_UNKNOWN = "output unknown - use the emergency switching off"
CUT_NOT_CONFIRMED = "cut not confirmed: use the emergency switching off"
PROGRAMMED_TO_ZERO = "programmed to zero, supply still powered"
WILL_RE_ENERGISE = "WILL RE-ENERGISE in {seconds:.0f} s"
NO_ARM_INPUT = "no arm input: no press is asked for at the bench"
NOT_INHIBITED_WITHOUT_MCU = "the wiring does not inhibit when the MCU is absent or in reset"

CAUTIONS: tuple[str, ...] = (PERSONS, NOT_A_SAFETY_DEVICE, LATCHES_OPEN, DANGER_SIGNAL, BEFORE_TOUCHING, SET_TO_ZERO,
                             ABSORPTION)


def discharge_caution(bleed_times: float, measured: bool) -> str:
    """What is said after a cut: how many bleed times have passed, whether the voltage is measured, the caution."""
    where = "" if measured else f"Voltage {NOT_MEASURED}. "
    return f"{where}{bleed_times:.1f} bleed times since the cut. {BEFORE_TOUCHING}"
