"""The one instrument: what is programmed, when it acts, what is pending, how it ends."""

from dataclasses import replace

import pytest

from hvhost.publish.instrument.device import Caller, Device
from hvhost.publish.instrument.errors import Err, ScpiError
from hvhost.publish.snapshot import LinkState, Permission, Phase
from hvhost.words.errors import CannotConnect, CommandRefused
from tests.publish.instrument.fakes import BENCH, DIRECT, PLAN, FakeBench

ME = Caller(who="me", ticket="mine", number=1)
OTHER = Caller(who="other", ticket="theirs", number=2)


class Desk:
    """A device on a fake bench with the seat taken."""

    def __init__(self) -> None:
        self.bench = FakeBench()
        self.device = Device(BENCH, self.bench.ask)
        self.bench.ask("seat.take", {"ticket": ME.ticket}, ME.who)
        self.device.take(self.bench.picture())

    def program(self, **change: float) -> None:
        """Program as the holder."""
        self.device.program(ME, self.bench.now_s, **change)

    def on(self) -> None:
        """OUTPut ON as the holder."""
        self.device.switch_on(ME, self.bench.now_s)

    def look(self, seconds: float = 0.1) -> list[tuple[Err, str, int | None]]:
        """Pass time, take a picture; what ended."""
        self.bench.pass_time(seconds)
        return [(one.number, one.text, one.caller) for one in self.device.take(self.bench.picture())]

    def energised(self, volts: float = 1e3) -> "Desk":
        """A direct run with this set-point reached."""
        self.program(volts=volts, amps=1e-3, slew=5e3)
        self.bench.arm()
        self.look()
        self.on()
        while self.device.busy:
            assert self.look() == []
        return self


@pytest.fixture
def desk() -> Desk:
    """A fresh one."""
    return Desk()


def refused(act: object, *args: object) -> Err:
    """The error of an act that is refused."""
    assert callable(act)
    with pytest.raises(ScpiError) as caught:
        act(*args)
    return caught.value.number


def test_a_fresh_instrument_programs_nothing() -> None:
    """0 V, 0 A, the bench's own slew and ceilings."""
    settings = Desk().device.settings
    assert (settings.volts, settings.amps, settings.slew, settings.limit_v, settings.limit_a) == (
        0.0, 0.0, 5e3, 24e3, 4e-3)


def test_with_the_output_off_a_set_point_is_kept_and_asks_nothing_of_the_bench(desk: Desk) -> None:
    """Programming is no energising; the bench is asked only whether the seat is held."""
    desk.program(volts=5e3)
    desk.program(amps=1e-3)
    assert (desk.device.settings.volts, desk.device.settings.amps) == (5e3, 1e-3)
    assert desk.bench.methods == ["seat.take"]
    assert not desk.device.busy


def test_without_the_seat_nothing_is_programmed(desk: Desk) -> None:
    """-203, and the setting stays as it was."""
    with pytest.raises(ScpiError) as caught:
        desk.device.program(OTHER, desk.bench.now_s, volts=5e3)
    assert caught.value.number is Err.PROTECTED
    assert "control is with me" in caught.value.information
    assert desk.device.settings.volts == 0.0


def test_a_limit_below_what_is_programmed_is_a_conflict(desk: Desk) -> None:
    """And a limit above it is taken."""
    desk.program(volts=5e3)
    with pytest.raises(ScpiError) as caught:
        desk.program(limit_v=4e3)
    assert caught.value.number is Err.CONFLICT
    desk.program(limit_v=5e3)


@pytest.mark.parametrize(("permission", "run"), [
    (Permission.IDLE, None), (Permission.IDLE, DIRECT), (Permission.REQUESTED, DIRECT), (Permission.LOWERING, DIRECT),
    (Permission.RUNNING, PLAN), (Permission.WARNING, PLAN), (Permission.RUNNING, replace(DIRECT, ended=True))])
def test_on_is_a_conflict_unless_a_direct_run_is_armed_by_both_acts(desk: Desk, permission: Permission,
                                                                    run: object) -> None:
    """-221: a legal command that the present state forbids; a request that waits for its press is not armed."""
    desk.program(volts=1e3, amps=1e-3)
    desk.bench.permission, desk.bench.run = permission, run  # type: ignore[assignment]
    desk.look(0.0)
    desk.device.take(replace(desk.bench.picture(), now_s=desk.bench.now_s + 0.01))
    assert refused(desk.on) is Err.CONFLICT
    assert "set" not in desk.bench.methods
    assert not desk.device.on


def test_on_is_refused_with_a_latch_without_a_link_and_before_anything_is_known(desk: Desk) -> None:
    """Each with its own text."""
    assert refused(Device(BENCH, desk.bench.ask).switch_on, ME, 0.0) is Err.CONFLICT
    desk.bench.arm()
    desk.bench.latched = ("interlock",)
    desk.look()
    with pytest.raises(ScpiError, match="latched: interlock"):
        desk.on()
    desk.bench.latched, desk.bench.link, desk.bench.link_text = (), LinkState.OBSERVE, "settings differ"
    desk.look()
    with pytest.raises(ScpiError, match="settings differ"):
        desk.on()


def test_on_sends_what_is_programmed_to_an_energised_direct_run(desk: Desk) -> None:
    """From then on a set-point acts at once, whole, with what is programmed beside it."""
    desk.energised(1e3)
    assert desk.bench.asked[-1][0] == "set" or "set" in desk.bench.methods
    assert desk.bench.goal == (1e3, 1e-3, 5e3)
    desk.program(volts=2e3)
    assert desk.bench.goal == (2e3, 1e-3, 5e3)
    desk.program(slew=100.0)
    assert desk.bench.goal == (2e3, 1e-3, 100.0)


def test_the_same_set_point_again_is_sent_again(desk: Desk) -> None:
    """Somebody else may have moved the output meanwhile."""
    desk.energised(1e3)
    desk.bench.goal = (500.0, 1e-3, 5e3)
    desk.program(volts=1e3)
    assert desk.bench.goal[0] == 1e3


def test_a_voltage_without_any_current_is_a_conflict(desk: Desk) -> None:
    """At ON, and while on; zero volts need none."""
    desk.program(volts=1e3)
    desk.bench.arm()
    desk.look()
    with pytest.raises(ScpiError, match="1 kV with a current limit of zero"):
        desk.on()
    desk.program(volts=0.0)
    desk.on()
    assert desk.device.on
    assert refused(lambda: desk.program(volts=1e3)) is Err.CONFLICT
    assert desk.device.settings.volts == 0.0


def test_while_the_bench_proves_and_warns_on_is_kept_until_it_is_energised(desk: Desk) -> None:
    """The press has been made; what was programmed goes out with the first picture of the energised run."""
    desk.program(volts=1e3, amps=1e-3)
    desk.bench.arm(Permission.PROVING)
    desk.look()
    desk.on()
    assert desk.device.busy
    assert not desk.device.on
    desk.bench.arm(Permission.WARNING)
    assert desk.look() == []
    assert "set" not in desk.bench.methods
    desk.bench.arm(Permission.RUNNING)
    assert desk.look() == []
    assert desk.bench.methods[-1] == "set"
    assert desk.device.on
    for _ in range(5):
        desk.look()
    assert not desk.device.busy
    assert desk.bench.volts == 1e3


def test_an_on_that_was_kept_needs_the_seat_when_it_is_carried_out(desk: Desk) -> None:
    """Whoever gave control back is not obeyed later."""
    desk.program(volts=1e3, amps=1e-3)
    desk.bench.arm(Permission.WARNING)
    desk.look()
    desk.on()
    desk.bench.ask("seat.release", {"ticket": ME.ticket}, ME.who)
    desk.bench.arm(Permission.RUNNING)
    assert [(number, caller) for number, _, caller in desk.look()] == [(Err.PROTECTED, 1)]
    assert not desk.device.on
    assert not desk.device.busy
    assert "set" not in desk.bench.methods


@pytest.mark.parametrize("stop", ["lower", "cut"])
def test_a_stop_needs_no_seat_and_forgets_what_was_kept(desk: Desk, stop: str) -> None:
    """Nothing that was kept comes back by itself."""
    desk.program(volts=1e3, amps=1e-3)
    desk.bench.arm(Permission.WARNING)
    desk.look()
    desk.on()
    getattr(desk.device, stop)(OTHER, desk.bench.now_s)
    assert desk.bench.methods[-1] == stop
    assert desk.look() == []
    desk.bench.arm(Permission.RUNNING)
    desk.look()
    assert "set" not in desk.bench.methods


def test_a_stop_that_cannot_reach_the_bench_is_told(desk: Desk) -> None:
    """-241 with the advice; what was kept is forgotten all the same."""
    desk.energised()
    desk.bench.reachable = False
    with pytest.raises(ScpiError) as caught:
        desk.device.lower(ME, desk.bench.now_s)
    assert caught.value.number is Err.HARDWARE_MISSING
    assert "emergency switching off" in caught.value.information
    assert not desk.device.on


def test_an_operation_is_pending_until_the_words_stand_at_the_goal(desk: Desk) -> None:
    """From the set-point on, through the ramp, to the last word; then the flag falls and nothing is told."""
    desk.energised(1e3)
    desk.program(volts=3e3)
    seen = 0
    while desk.device.busy:
        assert desk.look() == []
        seen += 1
    assert 4 <= seen <= 6  # 2 kV at 5 kV/s in pictures of 0.1 s
    assert desk.bench.volts == 3e3


def test_a_lowering_is_pending_until_the_bench_is_off(desk: Desk) -> None:
    """Whoever asked for it."""
    desk.energised(1e3)
    desk.device.lower(ME, desk.bench.now_s)
    assert desk.device.busy
    for _ in range(5):
        desk.look()
    assert not desk.device.busy
    desk.bench.permission = Permission.LOWERING
    desk.bench.volts = 5e3
    desk.look()
    assert desk.device.busy


def test_a_plans_ramp_is_nobodys_pending_operation(desk: Desk) -> None:
    """*OPC? beside a plan run answers at once: the ramp was not commanded here."""
    desk.bench.arm(Permission.RUNNING, PLAN)
    desk.bench.phase = Phase.RAMP
    desk.device.take(replace(desk.bench.picture(), now_s=desk.bench.now_s + 0.1, phase=Phase.RAMP))
    assert not desk.device.busy


def test_a_trip_ends_what_is_pending_and_names_its_causes_to_everybody(desk: Desk) -> None:
    """One error with the causes, for every connection; the next picture tells nothing again."""
    desk.energised(1e3)
    desk.program(volts=9e3)
    desk.look()
    desk.bench.trip("overcurrent", "breakdown")
    assert desk.look() == [(Err.DEVICE, "tripped: overcurrent, breakdown", None)]
    assert (desk.device.busy, desk.device.on, desk.device.trips) == (False, False, 1)
    assert desk.look() == []


def test_a_latch_that_stands_when_the_instrument_is_made_is_no_news() -> None:
    """It is a condition to read, not an event that just happened."""
    bench = FakeBench()
    bench.latched = ("restarted",)
    device = Device(BENCH, bench.ask)
    assert device.take(bench.picture()) == ()


@pytest.mark.parametrize(("how", "number", "words"), [
    ("lowered", Err.EXECUTION, "being lowered"), ("ended", Err.EXECUTION, "is over"), ("lost", Err.HARDWARE, "link")])
def test_any_other_end_of_the_run_is_told_to_whoever_commanded(desk: Desk, how: str, number: Err, words: str) -> None:
    """A lowering by somebody else, the end of the run, a lost link."""
    desk.energised(1e3)
    desk.program(volts=9e3)
    desk.look()
    if how == "lost":
        desk.bench.link, desk.bench.permission = LinkState.LOST, Permission.IDLE
    elif how == "ended":
        desk.bench.permission = Permission.IDLE
    else:
        desk.bench.ask("lower", {"ticket": "x"}, "another")
    told = desk.look()
    assert [(one[0], one[2]) for one in told] == [(number, 1)]
    assert words in told[0][1]
    assert not desk.device.on


def test_a_goal_that_somebody_else_replaced_does_not_stay_pending_for_ever(desk: Desk) -> None:
    """The words stand elsewhere in a hold: the wait ends with an error."""
    desk.energised(1e3)
    desk.program(volts=9e3)
    desk.look()
    desk.bench.goal = (2e3, 1e-3, 5e3)
    told = [one for _ in range(20) for one in desk.look()]
    assert [(one[0], one[2]) for one in told] == [(Err.EXECUTION, 1)]
    assert "another set-point" in told[0][1]
    assert not desk.device.busy


def test_a_picture_from_before_the_last_act_ends_nothing(desk: Desk) -> None:
    """What was drawn before a set-point says nothing about it."""
    desk.energised(1e3)
    old = desk.bench.picture()
    desk.bench.now_s += 0.01
    desk.program(volts=2e3)
    assert desk.device.take(old) == ()
    assert desk.device.busy
    assert not desk.device.seen_since(0.0)


def test_what_the_bench_refuses_becomes_the_standards_error() -> None:
    """Seat -203, beyond a ceiling -222, anything else that is refused -221, other errors -200."""
    answers: list[Exception] = [CommandRefused("control", "nobody has it", "seat"),
                                CommandRefused("0 to 9 V", "10 V", "set-point"),
                                CommandRefused("0 to 9 A", "10 A", "current limit"),
                                CommandRefused("an energised direct run", "idle", "set"),
                                CannotConnect("a port", "none")]

    def ask(method: str, params: dict[str, object], who: str) -> dict[str, object]:
        raise answers.pop(0)

    device = Device(BENCH, ask)
    numbers = [refused(device.ask, "set", {}, ME) for _ in range(len(answers))]
    assert numbers == [Err.PROTECTED, Err.OUT_OF_RANGE, Err.OUT_OF_RANGE, Err.CONFLICT, Err.EXECUTION]


def test_the_slowest_slew_is_a_code_an_hour(desk: Desk) -> None:
    """Slower than that no word would move."""
    assert desk.device.slowest == pytest.approx(25e3 / 65_535 / 3600)
