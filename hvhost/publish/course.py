"""The course that a run is still to take: corners of voltage over time from the program and the runner's position.

It is what will happen if nothing hinders it: no arc, no mean outside its tolerance.  Nothing decides by it.
"""

from collections.abc import Sequence

from hvhost.plan.program import HoldStep, RampStep, RestStep, Step
from hvhost.publish.snapshot import COURSE_KEPT, CoursePoint
from hvhost.supervisor.notes import Doing
from hvhost.supervisor.runner import Runner
from hvhost.supervisor.states import Permission

BEFORE = frozenset({Permission.IDLE, Permission.REQUESTED, Permission.WARNING})


class _Walk:
    """Collects corners from the present on; ``full`` once no more are kept."""

    def __init__(self, t_s: float, volts: float) -> None:
        self.points = [CoursePoint(t_s, volts)]

    @property
    def full(self) -> bool:
        return len(self.points) >= COURSE_KEPT

    def to(self, volts: float, slew_v_per_s: float) -> None:
        """Go to ``volts``; nothing where they are there or the slew says nothing."""
        last = self.points[-1]
        if slew_v_per_s > 0.0 and volts != last.volts:
            self._add(last.t_s + abs(volts - last.volts) / slew_v_per_s, volts)

    def stay(self, seconds: float) -> None:
        """Stay where it is."""
        last = self.points[-1]
        if seconds > 0.0:
            self._add(last.t_s + seconds, last.volts)

    def _add(self, t_s: float, volts: float) -> None:
        if not self.full:
            self.points.append(CoursePoint(round(t_s, 3), round(volts, 3)))


def course_of(runner: Runner, permission: Permission, now_s: float, volts: float, *, starts_s: float = 0.0,
              rested_s: float = 0.0) -> tuple[CoursePoint, ...]:
    """Return the corners from (now, the set-point in force) to the end of the program, at most ``COURSE_KEPT``.

    ``starts_s`` is the time until the first segment of a run that is not energised yet; ``rested_s`` what a rest has
    lasted.  Empty where nothing is to come.
    """
    if runner.doing is Doing.PAUSED:  # the words are zero at once; the last block may still tell of those before
        volts = 0.0
    bench, walk = runner.bench, _Walk(round(now_s, 3), max(0.0, volts))
    if permission is Permission.LOWERING:
        walk.to(0.0, bench.down_slew_v_per_s)
    elif runner.direct:
        if runner.set_point is not None and runner.doing is not Doing.DONE:
            walk.to(runner.set_point.volts, runner.set_point.slew_v_per_s)
    elif permission in BEFORE:
        walk.stay(starts_s)
        _follow(walk, runner, runner.program.steps)
    elif runner.doing is not Doing.DONE:
        _go_on(walk, runner, rested_s)
    return tuple(walk.points) if len(walk.points) > 1 else ()


def _go_on(walk: _Walk, runner: Runner, rested_s: float) -> None:
    """From the midst of a step: the pause and the climb after it, what is left of the step, the steps after it."""
    step, retreat = runner.step, runner.program.retreat
    rest = runner.program.steps[runner.at:]
    over = retreat is not None and runner.arcs_in_step >= retreat.series  # the series is complete: from zero
    if runner.doing is Doing.PAUSED:
        walk.stay(runner.pause_left_s() or 0.0)
    if runner.doing in (Doing.PAUSED, Doing.RETREATING) and retreat is not None and not over \
            and isinstance(step, RampStep | HoldStep):
        top = step.to_v if isinstance(step, RampStep) else step.v
        back = min(retreat.target(runner.v_breakdown), top)
        if back > walk.points[-1].volts:
            walk.to(back, retreat.climb_v_per_s)
    if isinstance(step, HoldStep) and not (over and runner.doing is Doing.PAUSED):
        walk.to(step.v, runner.bench.slew_v_per_s)
        walk.stay(max(0.0, step.hold_s - runner.elapsed_s))
        rest = rest[1:]
    elif isinstance(step, RestStep) and runner.doing is Doing.RESTING:
        walk.to(0.0, runner.bench.down_slew_v_per_s)
        walk.stay(max(0.0, step.rest_s - rested_s))
        rest = rest[1:]
    _follow(walk, runner, rest)


def _follow(walk: _Walk, runner: Runner, steps: Sequence[Step]) -> None:
    """Whole steps in order, then down to zero."""
    bench = runner.bench
    for step in steps:
        if walk.full:
            return
        if isinstance(step, RampStep):
            walk.to(step.to_v, step.slew_v_per_s)
        elif isinstance(step, HoldStep):
            walk.to(step.v, bench.slew_v_per_s)
            walk.stay(step.hold_s)
        else:
            walk.to(0.0, bench.down_slew_v_per_s)
            walk.stay(step.rest_s)
    walk.to(0.0, bench.down_slew_v_per_s)


def expected_s(course: Sequence[CoursePoint], now_s: float) -> float | None:
    """Return the seconds to the course's end, None where there is none or it was too long to keep."""
    if not course or len(course) >= COURSE_KEPT:
        return None
    return max(0.0, course[-1].t_s - now_s)


class Place:
    """Since which tick the run is in its step, and at rest; figures of a screen, nothing decides by them."""

    def __init__(self) -> None:
        self._at = -1
        self._begun = self._rest = self._now = 0
        self._resting = False

    def look(self, at: int, resting: bool, tick: int) -> None:
        """Take where the runner stands at a tick; ``resting`` is at zero volts in a rest."""
        if at != self._at:
            self._at, self._begun, self._resting = at, tick, False
        if resting and not self._resting:
            self._rest = tick
        self._resting, self._now = resting, tick

    def step_s(self, tick_hz: int) -> float:
        """Seconds since the step began."""
        return max(0.0, (self._now - self._begun) / tick_hz)

    def rested_s(self, tick_hz: int) -> float:
        """Seconds that a rest has lasted."""
        return max(0.0, (self._now - self._rest) / tick_hz) if self._resting else 0.0
