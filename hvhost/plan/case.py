"""What a preflight check looks at, and how it says what it found."""

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from datetime import date

from hvhost.bench.model import Bench
from hvhost.plan.passing import History
from hvhost.plan.plan import Plan, RunSheet
from hvhost.plan.program import CriterionKind, HoldStep, Program, RestStep, Step
from hvhost.words.findings import Finding, Grade


@dataclass(frozen=True, slots=True, kw_only=True)
class Case:
    """Plan x run sheet x bench, the program compiled from them, and what earlier runs tell.

    ``today`` is None where nobody asked for dates to be judged; ``tick_hz`` and ``queue`` are the MCU's.
    """

    plan: Plan
    sheet: RunSheet
    bench: Bench
    program: Program
    history: History
    today: date | None
    tick_hz: int
    queue: int

    @property
    def load_f(self) -> float:
        """Capacitance that is charged: output, cable, and the most that the sheet declares for the specimen."""
        return self.bench.stored_f + (self.sheet.capacitance.high if self.sheet.capacitance else 0.0)

    def at_step(self, grade: Grade, step: Step, what: str, expected: str, found: str, remedy: str = "") -> Finding:
        """A finding at the place of a step."""
        return at_place(grade, step.place, what, expected, found, remedy)

    def in_sheet(self, grade: Grade, what: str, expected: str, found: str, remedy: str = "") -> Finding:
        """A finding about a key of the run sheet."""
        line = self.sheet.lines.get(what) or self.sheet.lines.get(what.partition(".")[0], 0)
        return Finding(grade=grade, file=self.sheet.file, line=line, what=what, expected=expected, found=found,
                       remedy=remedy)

    def in_plan(self, grade: Grade, line: int, what: str, expected: str, found: str, remedy: str = "") -> Finding:
        """A finding at a line of the plan."""
        return Finding(grade=grade, file=self.plan.file, line=line, what=what, expected=expected, found=found,
                       remedy=remedy)

    def energised_steps(self) -> Iterator[Step]:
        """Yield ramps and holds."""
        return (step for step in self.program.steps if not isinstance(step, RestStep))

    def withstand_holds(self) -> tuple[HoldStep, ...]:
        """Return the holds that decide over withstand.

        Those of a level criterion; without one, and with 'no breakdown' asked, those at which nothing is read.
        """
        levels = {c.hold for c in self.program.acceptance if c.kind is CriterionKind.LEVEL_HELD}
        if levels:
            return tuple(hold for hold in self.program.holds() if hold.name in levels)
        if not any(c.kind is CriterionKind.NO_BREAKDOWN for c in self.program.acceptance):
            return ()
        return tuple(hold for hold in self.program.holds() if not hold.readings_s)


Check = Callable[[Case], Iterator[Finding]]


def at_place(grade: Grade, place: str, what: str, expected: str, found: str, remedy: str = "") -> Finding:
    """A finding at a 'file:line'."""
    file, _, line = place.rpartition(":")
    return Finding(grade=grade, file=file, line=int(line), what=what, expected=expected, found=found, remedy=remedy)
