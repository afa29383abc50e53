"""When the view rings."""

from dataclasses import replace

from hvhost.publish.bells import TRIP_EVERY_S, TRIP_RINGS, Bell
from hvhost.publish.snapshot import Permission, Phase, Snapshot, StopState
from hvhost.publish.wording import View
from tests.pictures.states import IDLE, RUN, RUNNING, STATES, TRIPPED

VIEW = View()


def rings(before: Snapshot, after: Snapshot, enabled: bool = True) -> bool:
    """Whether the second snapshot rings."""
    bell = Bell(enabled)
    bell.rings(before, VIEW, 0.0)
    return bell.rings(after, VIEW, 0.1)


def later(snapshot: Snapshot, seconds: float, **changes: object) -> Snapshot:
    """The snapshot so much later."""
    return replace(snapshot, now_s=snapshot.now_s + seconds, seq=snapshot.seq + 1, **changes)


def test_a_hold_that_ends_rings_once() -> None:
    """The next step begins, or the run ends after its last hold."""
    next_step = later(RUNNING, 0.1, phase=Phase.RAMP, run=replace(RUN, step_number=3, hold=None))
    assert rings(RUNNING, next_step)
    assert rings(RUNNING, later(RUNNING, 0.1, permission=Permission.LOWERING, phase=Phase.NONE,
                                run=replace(RUN, hold=None, ended=True)))
    assert not rings(next_step, later(next_step, 0.1))
    assert not rings(RUNNING, later(RUNNING, 0.1))


def test_a_reading_that_falls_due_rings_and_a_restart_does_not() -> None:
    """The count-down went through zero; a clock that began anew put it back."""
    soon = replace(RUNNING, run=replace(RUN, next_reading_s=0.05))
    assert rings(soon, later(soon, 0.1, run=replace(RUN, next_reading_s=29.9)))
    assert rings(soon, later(soon, 0.1, run=replace(RUN, next_reading_s=None)))
    assert not rings(RUNNING, later(RUNNING, 0.1, run=replace(RUN, next_reading_s=60.0)))
    assert not rings(soon, later(soon, 0.01, run=replace(RUN, next_reading_s=0.04)))


def test_the_end_of_a_pause_rings() -> None:
    """The bench re-energises by itself: whoever waits hears it."""
    pausing = STATES["pausing"][0]
    assert rings(pausing, later(pausing, 0.1, permission=Permission.RUNNING, phase=Phase.RETREAT, pause_s=None))
    assert not rings(pausing, later(pausing, 0.1, pause_s=6.5))


def test_what_can_be_switched_is_silent_when_it_is() -> None:
    """The key and the option switch these three."""
    after = later(RUNNING, 0.1, phase=Phase.RAMP, run=replace(RUN, step_number=3, hold=None))
    assert not rings(RUNNING, after, enabled=False)
    bell = Bell(enabled=False)
    bell.switch()
    bell.rings(RUNNING, VIEW, 0.0)
    assert bell.rings(after, VIEW, 0.1)


def test_a_trip_rings_whatever_was_switched() -> None:
    """Several times, so that it is not taken for a reading."""
    bell = Bell(enabled=False)
    bell.rings(RUNNING, VIEW, 0.0)
    tripped, heard = later(TRIPPED, 0.1), 0
    for n in range(100):
        heard += bell.rings(tripped, VIEW, 0.1 + n * TRIP_EVERY_S / 5)
    assert heard == TRIP_RINGS
    more = later(tripped, 60.0, latched=("breakdown", "interlock"))
    assert bell.rings(more, VIEW, 99.0)


def test_a_cut_that_is_not_confirmed_and_an_unknown_output_ring_too() -> None:
    """What sends people to the emergency switching off is heard."""
    assert rings(RUNNING, later(RUNNING, 0.1, stop=StopState.CUT_NOT_CONFIRMED), enabled=False)
    bell = Bell(enabled=False)
    bell.rings(RUNNING, VIEW, 0.0)
    assert bell.rings(RUNNING, View(connected=False), 3.0)


def test_nothing_rings_at_the_first_look_or_in_another_run() -> None:
    """Whoever opens the view is not rung at for what happened before."""
    assert not Bell().rings(TRIPPED, VIEW, 0.0)
    other = later(RUNNING, 0.1, phase=Phase.RAMP, run=replace(RUN, run_id="other", step_number=1))
    assert not rings(RUNNING, other)
    assert not rings(IDLE, later(IDLE, 0.1))
