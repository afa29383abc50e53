"""The one instrument behind all connections: set-points, what is under way, and the way to the bench.

Theory.  *Set-points are kept until the output is switched on.*  ``VOLTage 5e3`` with the output off programs the
instrument and moves nothing; ``OUTPut ON`` sends what is programmed to a direct run that was armed at the bench by both
acts, and from then on a set-point acts at once.  Nothing here arms: the press alone moves nothing that somebody stored
an hour before, and ``OUTPut ON`` alone energises nothing.  After the press, while the bench proves its cut path and
warns, ``OUTPut ON`` is kept and carried out when the run is energised.

*Operations.*  A set-point that acts, an ``OUTPut ON`` that is kept, and any lowering are pending operations in the
sense of IEEE 488.2 (12): ``*OPC``, ``*OPC?`` and ``*WAI`` of every connection wait for them.  Pending ends when the
set-point words that the MCU reports stand at the goal; the readback is a matter for MEASure.  A trip, a lowering by
somebody else or the end of the run ends them too, with an error that tells why.

What is known of the bench comes in pictures, ten a second; the bench is asked only to act.  Time is an argument.
"""

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any

from hvhost.bench.model import Bench
from hvhost.publish.instrument.conditions import direct_run
from hvhost.publish.instrument.errors import Err, ScpiError
from hvhost.publish.snapshot import LinkState, Permission, Phase, Snapshot
from hvhost.words.errors import CommandRefused, HvhostError
from hvhost.words.quantities import Dimension, format_quantity

Ask = Callable[[str, dict[str, Any], str], dict[str, Any]]

SUPERSEDED_S = 1.0  # a hold for so long somewhere else than at the goal: somebody else's set-point
SLOWEST_S = 3600.0  # a code of the converter in an hour is the slowest slew that still is one
_BENCH_LIMITS = frozenset(("set-point", "current limit", "slew"))


@dataclass(frozen=True, slots=True, kw_only=True)
class Settings:
    """What is programmed: volts and amps in the direction of the bench's polarity, and the limits of both."""

    volts: float
    amps: float
    slew: float
    limit_v: float
    limit_a: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Caller:
    """Who asks: a name for the record, the ticket by which the seat knows this connection."""

    who: str
    ticket: str
    number: int = 0


@dataclass(frozen=True, slots=True, kw_only=True)
class Ending:
    """Why a pending operation did not reach its goal; ``caller`` None concerns every connection."""

    number: Err
    text: str
    caller: int | None = None


@dataclass(slots=True)
class _Goal:
    """Set-point words that the MCU is to report, and since when they are not there in a hold."""

    volts: float
    amps: float
    caller: int
    elsewhere_s: float | None = None


class Device:
    """See the module's text.  ``ask`` carries out one request at the bench and raises `HvhostError` where refused."""

    def __init__(self, bench: Bench, ask: Ask) -> None:
        self.bench, self._ask = bench, ask
        self.shot: Snapshot | None = None
        self.settings = self.reset_settings()
        self.on = False  # the programmed set-points act at once
        self.trips = 0  # operations ended by a trip so far
        self._wanted: Caller | None = None  # an OUTPut ON that is kept until the run is energised
        self._goal: _Goal | None = None
        self._acted_s = float("-inf")

    def reset_settings(self) -> Settings:
        """What *RST programs: nothing, at the bench's own slew, within the bench's ceilings."""
        bench = self.bench
        return Settings(volts=0.0, amps=0.0, slew=bench.slew_v_per_s, limit_v=bench.v_max, limit_a=bench.i_max)

    # ------------------------------------------------------------ what may be programmed

    @property
    def slowest(self) -> float:
        """The smallest slew, in V/s."""
        return abs(self.bench.voltage.program.gain) / SLOWEST_S

    def program(self, caller: Caller, now_s: float, **change: float) -> None:
        """Program one setting that was found in range; where the output is on it acts at once, whole or not at all."""
        acts = self.on and not change.keys() & {"limit_v", "limit_a"}
        if not acts:  # a set-point that acts is asked of the bench, which looks at the seat itself
            self.need_seat(caller)
        wanted = replace(self.settings, **change)
        for value, limit, what in ((wanted.volts, wanted.limit_v, "voltage"), (wanted.amps, wanted.limit_a, "current")):
            if value > limit:
                raise ScpiError(Err.CONFLICT, f"the {what} programmed is above that limit")
        if acts:
            self._send(wanted, caller, now_s)
        self.settings = wanted

    def switch_on(self, caller: Caller, now_s: float) -> None:
        """OUTPut ON: carried out, kept until the output is energised, or refused; see the module's text."""
        self.need_seat(caller)
        shot = self.shot
        if shot is None or shot.link is not LinkState.GREETED:
            raise ScpiError(Err.CONFLICT, f"link: {shot.link_text if shot else 'nothing known yet'}")
        if shot.latched:
            raise ScpiError(Err.CONFLICT, f"latched: {', '.join(shot.latched)}")
        if not direct_run(shot) or shot.permission in (Permission.IDLE, Permission.LOWERING):
            raise ScpiError(Err.CONFLICT, "no direct run is armed at the bench")
        if shot.permission is Permission.REQUESTED:
            raise ScpiError(Err.CONFLICT, "the arm request waits for the press at the bench")
        _possible(self.settings)
        if shot.permission is Permission.RUNNING:
            self._send(self.settings, caller, now_s)
            self.on = True
        else:
            self._wanted = caller

    def lower(self, caller: Caller, now_s: float) -> None:
        """Lower, whoever asks; what was kept is forgotten."""
        self._stop("lower", caller, now_s)

    def cut(self, caller: Caller, now_s: float) -> None:
        """Cut, whoever asks."""
        self._stop("cut", caller, now_s)

    def _stop(self, method: str, caller: Caller, now_s: float) -> None:
        self.on, self._wanted, self._goal, self._acted_s = False, None, None, now_s
        try:
            self._ask(method, {"ticket": caller.ticket}, caller.who)
        except HvhostError as error:
            raise ScpiError(Err.HARDWARE_MISSING, str(error)) from None

    def reset(self) -> None:
        """The settings' part of *RST; the output's part is a lower."""
        self.settings = self.reset_settings()

    # ------------------------------------------------------------ the seat and the latch

    def need_seat(self, caller: Caller) -> None:
        """Raise -203 unless this connection has control and has acknowledged every stop by somebody else."""
        stopped_by = self.stopped_by(caller)
        if stopped_by:
            raise ScpiError(Err.PROTECTED, f"stopped by {stopped_by}")

    def stopped_by(self, caller: Caller) -> str:
        """Who stopped the bench under this connection and waits to be acknowledged; raises -203 without control."""
        return str(self.ask("seat.check", {"ticket": caller.ticket}, caller).get("stopped_by", ""))

    def ask(self, method: str, params: dict[str, Any], caller: Caller) -> dict[str, Any]:
        """One request to the bench; what it refuses becomes the standard's error."""
        try:
            return self._ask(method, params, caller.who)
        except CommandRefused as refused:
            if refused.where == "seat":
                raise ScpiError(Err.PROTECTED, refused.found) from None
            number = Err.OUT_OF_RANGE if refused.where in _BENCH_LIMITS else Err.CONFLICT
            raise ScpiError(number, str(refused)) from None
        except HvhostError as error:
            raise ScpiError(Err.EXECUTION, str(error)) from None

    # ------------------------------------------------------------ pictures

    def seen_since(self, asked_s: float) -> bool:
        """Whether the picture is younger than a moment and than the last act."""
        return self.shot is not None and self.shot.now_s > max(asked_s, self._acted_s)

    @property
    def busy(self) -> bool:
        """Whether an operation is pending (IEEE 488.2, 12.5: the no-operation-pending flag is false)."""
        shot = self.shot
        if self._wanted is not None or self._goal is not None:
            return True
        if shot is None:
            return False
        if shot.now_s <= self._acted_s:
            return True
        on_the_way = shot.permission is Permission.RUNNING and shot.phase is Phase.RAMP and direct_run(shot)
        return on_the_way or shot.permission is Permission.LOWERING

    def take(self, shot: Snapshot) -> tuple[Ending, ...]:
        """Take a picture: ends what is over, carries out an OUTPut ON that was kept; returns what failed and why."""
        if shot.now_s <= self._acted_s:
            return ()
        before, self.shot = self.shot, shot
        fresh = tuple(word for word in shot.latched if before is None or word not in before.latched)
        endings: list[Ending] = []
        if fresh and before is not None:
            self.trips += 1
            endings.append(Ending(number=Err.DEVICE, text=f"tripped: {', '.join(fresh)}"))
        if self._wanted is not None or self._goal is not None:
            failed = self._failed(shot)
            if failed is not None:
                if not endings:
                    endings.append(failed)
                self._wanted = self._goal = None
            elif shot.permission is Permission.RUNNING:
                endings += self._go_on(shot)
        if shot.permission is not Permission.RUNNING:
            self.on = False
        return tuple(endings)

    def _failed(self, shot: Snapshot) -> Ending | None:
        """Why what is pending can no longer come about, None while it can."""
        caller = self._wanted.number if self._wanted else self._goal.caller if self._goal else None
        if shot.link is not LinkState.GREETED:
            return Ending(number=Err.HARDWARE, text=f"link: {shot.link_text}", caller=caller)
        waiting = (Permission.PROVING, Permission.WARNING) if self._wanted else ()
        if direct_run(shot) and shot.permission in (Permission.RUNNING, *waiting):
            return None
        why = "is being lowered" if shot.permission is Permission.LOWERING else "is over"
        return Ending(number=Err.EXECUTION, text=f"the set-point was not reached: the run {why}", caller=caller)

    def _go_on(self, shot: Snapshot) -> list[Ending]:
        """The direct run is energised: carry out what was kept, or see whether the goal is reached."""
        wanted, self._wanted = self._wanted, None
        if wanted is not None:
            try:
                self.need_seat(wanted)
                self._send(self.settings, wanted, shot.now_s)
                self.on = True
            except ScpiError as error:
                return [Ending(number=error.number, text=error.information, caller=wanted.number)]
            return []
        goal = self._goal
        assert goal is not None
        if self._stands_at(shot, goal):
            self._goal = None
        elif shot.phase is Phase.RAMP:
            goal.elsewhere_s = None
        elif goal.elsewhere_s is None:
            goal.elsewhere_s = shot.now_s
        elif shot.now_s - goal.elsewhere_s > SUPERSEDED_S:
            self._goal = None
            return [Ending(number=Err.EXECUTION, text="another set-point took the place of this one",
                           caller=goal.caller)]
        return []

    def _stands_at(self, shot: Snapshot, goal: _Goal) -> bool:
        voltage, current = self.bench.voltage.program, self.bench.current.program
        if shot.set_volts is None or shot.set_amps is None:
            return False
        return (abs(shot.set_volts - voltage.value(voltage.code(goal.volts))) < 0.5 * abs(voltage.gain)
                and abs(shot.set_amps - current.value(current.code(goal.amps))) < 0.5 * abs(current.gain))

    def _send(self, wanted: Settings, caller: Caller, now_s: float) -> None:
        _possible(wanted)
        self.ask("set", {"volts": wanted.volts, "amps": wanted.amps, "slew": wanted.slew, "ticket": caller.ticket},
                 caller)
        self._goal, self._acted_s = _Goal(wanted.volts, wanted.amps, caller.number), now_s


def _possible(settings: Settings) -> None:
    """A voltage without any current cannot come about: the bench would trip on a readback that does not follow."""
    if settings.volts > 0.0 and settings.amps <= 0.0:
        raise ScpiError(Err.CONFLICT, f"{format_quantity(settings.volts, Dimension.VOLT)} with a current limit of zero")
