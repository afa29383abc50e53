"""What each acceptance criterion takes, and the criteria of a program made from those of a plan."""

from collections.abc import Iterator
from typing import Any

from hvhost.plan.plan import PlanCriterion
from hvhost.plan.program import Criterion, CriterionKind, HoldStep
from hvhost.plan.unroll import Unfilled, Unrolled
from hvhost.words.quantities import Dimension

# The dimension of each criterion's limit; None where it takes none.
CRITERION_LIMITS: dict[CriterionKind, Dimension | None] = {
    CriterionKind.NO_BREAKDOWN: None,
    CriterionKind.LEVEL_HELD: Dimension.VOLT,
    CriterionKind.LEAKAGE_BELOW: Dimension.AMP,
    CriterionKind.RESISTANCE_ABOVE: Dimension.OHM,
    CriterionKind.BREAKDOWN_ABOVE: Dimension.VOLT,
}
AT_READINGS = frozenset({CriterionKind.LEAKAGE_BELOW, CriterionKind.RESISTANCE_ABOVE})
ON_HOLDS = AT_READINGS | {CriterionKind.LEVEL_HELD}


def criterion_faults(kind: CriterionKind, limited: bool, block: Any) -> Iterator[tuple[str, str, str]]:
    """Yield (key, expected, found) for each key that is missing or does not belong to the criterion."""
    if limited and CRITERION_LIMITS[kind] is None:
        yield "limit", f"no 'limit' with '{kind}'", "'limit'"
    if not limited and kind in AT_READINGS | {CriterionKind.BREAKDOWN_ABOVE}:
        yield "limit", f"the key 'limit' with '{kind}'", "nothing"
    if block.at is not None and kind not in AT_READINGS:
        yield "at", f"no 'at' with '{kind}'", "'at'"
    if block.hold is not None and kind not in ON_HOLDS:
        yield "hold", f"no 'hold' with '{kind}', which is judged on the whole run", "'hold'"
    if block.tolerance is not None and kind is not CriterionKind.LEVEL_HELD:
        yield "tolerance", f"no 'tolerance' with '{kind}'", "'tolerance'"
    if block.guard_band and kind is not CriterionKind.LEVEL_HELD:
        yield "guard_band", f"no 'guard_band' with '{kind}': it always has one", "'guard_band'"


def criteria_of(walked: Unrolled) -> tuple[Criterion, ...]:
    """Return the criteria, one for each hold they are judged on; what does not fit is a finding of the walk."""
    made: list[Criterion] = []
    for criterion in walked.plan.acceptance:
        try:
            made += _made(walked, criterion)
        except Unfilled:
            continue
    return tuple(made)


def _made(walked: Unrolled, criterion: PlanCriterion) -> Iterator[Criterion]:
    place = f"{walked.plan.file}:{criterion.line}"
    limit = walked.optional(criterion.limit, "acceptance.limit", 0.0)
    if criterion.kind not in ON_HOLDS:
        yield Criterion(kind=criterion.kind, limit=limit, place=place)
        return
    holds = [item.step for item in walked.items if isinstance(item.step, HoldStep)
             and criterion.hold in ("", item.base)]
    at = None if criterion.at is None else walked.value(criterion.at, "acceptance.at")
    if criterion.kind in AT_READINGS:
        holds = _read(walked, criterion, holds, at)
    for hold in holds:
        level = criterion.kind is CriterionKind.LEVEL_HELD
        yield Criterion(kind=criterion.kind, limit=(limit or hold.v) if level else limit, hold=hold.name, reading_s=at,
                        tolerance=walked.optional(criterion.tolerance, "acceptance.tolerance", hold.tolerance)
                        if level else 0.0,
                        guard_band=level and (criterion.guard_band or hold.guard_band), place=place)


def _read(walked: Unrolled, criterion: PlanCriterion, holds: list[HoldStep], at: float | None) -> list[HoldStep]:
    """Return the holds that take the reading; none of them is a fault."""
    taken = [hold for hold in holds if hold.readings_s
             and (at is None or any(abs(time - at) <= 1e-9 * max(1.0, at) for time in hold.readings_s))]
    if not taken and holds:
        times = sorted({f"{time:g} s" for hold in holds for time in hold.readings_s}, key=lambda t: float(t[:-2]))
        walked.fault(criterion.line, "acceptance", "a reading time of the hold" + (f" ({', '.join(times)})" if times
                     else ", whose 'readings' list is empty"), f"{at:g} s" if at is not None else "none")
    return taken
