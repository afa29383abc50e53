"""A bench that plays the station for the instrument socket: seat, direct run, words, latch, pictures; time by hand.

It knows nothing of the parts under test but the values that pass between them.
"""

from dataclasses import replace
from pathlib import Path
from typing import Any

from hvhost.bench.file import load_bench
from hvhost.publish.instrument.commands import TREE
from hvhost.publish.instrument.conditions import operation_of, questionable_of
from hvhost.publish.instrument.device import Caller, Device
from hvhost.publish.instrument.session import Session, TalkLimits
from hvhost.publish.outlet import Outlet
from hvhost.publish.snapshot import (
    LinkState,
    Permission,
    Phase,
    Reading,
    RecordView,
    RunView,
    Snapshot,
    VoltageState,
)
from hvhost.supervisor.seat import Seat
from hvhost.words.errors import CommandRefused

BENCH = load_bench(Path(__file__).parents[3] / "configs" / "demo.bench.yaml")
DIRECT = RunView(run_id="251201n1", kind="direct", plan="direct run")
PLAN = RunView(run_id="251201n2", kind="plan", plan="withstand")
UTC_NS = 1_764_594_202_000_000_000


class FakeBench:
    """Plays daemon and MCU; ``picture`` shows it, ``pass_time`` moves the words to the goal."""

    def __init__(self) -> None:
        self.now_s = 100.0
        self.seat = Seat()
        self.asked: list[tuple[str, dict[str, Any], str]] = []
        self.said: list[str] = []
        self.outlets: list[Outlet] = []
        self.services: list[Any] = []
        self.link, self.link_text = LinkState.GREETED, "greeted"
        self.permission, self.phase = Permission.IDLE, Phase.NONE
        self.latched: tuple[str, ...] = ()
        self.run: RunView | None = None
        self.volts = self.amps = 0.0  # words
        self.goal = (0.0, 0.0, 1.0)
        self.replies: dict[int, str] = {}
        self.reading_age_s = 0.01
        self.flags: tuple[str, ...] = ()
        self.record = RecordView()
        self.reachable = True
        self._seq = self._tickets = 0

    @property
    def methods(self) -> list[str]:
        """What was asked that does something, in order."""
        return [method for method, _, _ in self.asked if method not in ("seat.check", "reply")]

    # ------------------------------------------------------------ the daemon's side

    def ask(self, method: str, params: dict[str, Any], who: str) -> dict[str, Any]:
        """One request."""
        self.asked.append((method, dict(params), who))
        ticket = str(params.get("ticket", ""))
        if method in ("lower", "cut"):
            return self._stop(method, ticket, who)
        if method == "seat.take":
            self.seat.take(who, ticket, self.now_s, reason=str(params.get("reason", "")))
            return {"holder": who}
        if method == "seat.release":
            return {"released": self.seat.release(ticket, self.now_s)}
        if method == "seat.acknowledge":
            self.seat.acknowledge(ticket)
            return {"acknowledged": True}
        if method == "reply":
            return {"reply": self.replies.get(params["ticket_number"], "")}
        if method == "seat.check" and self.seat.holds(ticket):
            return {"holder": who, "stopped_by": self.seat.stopped_by}
        self.seat.require(ticket)
        if method == "reset":
            return self._reset(params)
        assert method == "set"
        if self.permission is not Permission.RUNNING or self.run is None or self.run.kind != "direct":
            raise CommandRefused("an energised direct run that is not being stopped", str(self.permission), "set")
        self.goal = (params["volts"], params["amps"], params["slew"])
        return {}

    def add_outlet(self, outlet: Outlet) -> None:
        """Keep it."""
        self.outlets.append(outlet)

    def add_service(self, name: str, service: Any) -> None:
        """Keep it."""
        self.services.append((name, service))

    def say(self, text: str) -> None:
        """Keep it."""
        self.said.append(text)

    def _stop(self, method: str, ticket: str, who: str) -> dict[str, Any]:
        if not self.reachable:
            raise CommandRefused("a link to the MCU", self.link_text, method, "use the emergency switching off")
        self.seat.stopped(ticket, who)
        live = self.permission is Permission.RUNNING
        self.goal = (0.0, 0.0, 5e3)
        self.permission = Permission.LOWERING if live and method == "lower" else Permission.IDLE
        self._end_run()
        return {"lowering": live}

    def _reset(self, params: dict[str, Any]) -> dict[str, Any]:
        unknown = [word for word in params["causes"] if word not in ("overcurrent", "interlock", "breakdown")]
        if unknown:
            raise CommandRefused("the causes by their words", ", ".join(unknown), "reset")
        self._tickets += 1
        fits = set(params["causes"]) == set(self.latched)
        self.replies[self._tickets] = "ok" if fits else "refused: causes"
        if fits:
            self.latched = ()
        return {"ticket_number": self._tickets}

    # ------------------------------------------------------------ the bench's side

    def arm(self, permission: Permission = Permission.RUNNING, run: RunView = DIRECT) -> None:
        """A run is armed at the bench, and as far as this."""
        self.run, self.permission = run, permission
        self.phase = Phase.HOLD if permission is Permission.RUNNING else Phase.NONE

    def trip(self, *causes: str) -> None:
        """The MCU trips."""
        self.latched, self.permission, self.volts = causes, Permission.IDLE, 0.0
        self._end_run()

    def pass_time(self, seconds: float = 0.1) -> None:
        """Words go to the goal at its slew; a lowering that has arrived is off."""
        self.now_s += seconds
        if self.permission is Permission.RUNNING or self.permission is Permission.LOWERING:
            volts, amps, slew = self.goal
            step = slew * seconds
            self.volts += max(-step, min(step, volts - self.volts))
            self.amps = amps if self.permission is Permission.RUNNING else self.amps
            self.phase = Phase.RAMP if self.volts != volts else Phase.HOLD
        if self.permission is Permission.LOWERING and self.volts == 0.0:
            self.permission, self.phase = Permission.IDLE, Phase.NONE
        if self.permission is Permission.IDLE:
            self.volts = self.amps = 0.0

    def picture(self) -> Snapshot:
        """What the daemon shows now."""
        self._seq += 1
        voltage, current = BENCH.voltage.program, BENCH.current.program
        reading = None
        if self.link is not LinkState.LOST and self.reading_age_s <= 0.5:
            reading = Reading(volts=self.volts, amps=self.amps / 4, age_s=self.reading_age_s, flags=self.flags)
        return Snapshot(
            utc_ns=UTC_NS, now_s=self.now_s, seq=self._seq, bench="demo", link=self.link, link_text=self.link_text,
            permission=self.permission, phase=self.phase, latched=self.latched, voltage=VoltageState.PRESENT,
            set_volts=voltage.value(voltage.code(self.volts)), set_amps=current.value(current.code(self.amps)),
            reading=reading, run=self.run, seat=self.seat.holder.name if self.seat.holder else "", record=self.record,
            trip_amps=5e-3)

    def _end_run(self) -> None:
        if self.run is not None:
            self.run = replace(self.run, ended=True)


class Talk:
    """Sessions on one device and one fake bench, driven by hand."""

    def __init__(self) -> None:
        self.bench = FakeBench()
        self.device = Device(BENCH, self.bench.ask)
        self.sessions: list[Session] = []
        self.answers: dict[int, list[str]] = {}
        self.show()

    def client(self, limits: TalkLimits | None = None, *, stops_only: bool = False) -> "Client":
        """One more connection."""
        number = len(self.sessions) + 1
        answers = self.answers[number] = []
        session = Session(
            self.device, TREE, Caller(who=f"instrument {number}", ticket=f"ticket {number}", number=number),
            lambda line: answers.append(line.decode("ascii").rstrip("\n")), self.bench.now_s, limits,
            stops_only=stops_only)
        self.sessions.append(session)
        self.show()
        return Client(self, session, answers)

    def show(self) -> None:
        """A picture reaches the instrument, and whoever waited for it goes on."""
        shot = self.bench.picture()
        endings = self.device.take(shot)
        for session in self.sessions:
            session.news(endings, operation_of(shot), questionable_of(shot, BENCH.calibration_valid_until),
                         self.bench.now_s)
            session.resume(self.bench.now_s)
        self.work()

    def work(self) -> None:
        """Everybody's turn, until nobody has anything to do."""
        while any(session.ready for session in self.sessions):
            for session in self.sessions:
                session.turn(self.bench.now_s)
            self.bench.now_s += 0.001

    def after(self, seconds: float) -> None:
        """Pass time with ten pictures a second."""
        for _ in range(round(seconds * 10)):
            self.bench.pass_time(0.1)
            self.show()


class Client:
    """One connection as its user sees it."""

    def __init__(self, talk: Talk, session: Session, answers: list[str]) -> None:
        self.talk, self.session, self.answers = talk, session, answers

    def write(self, text: str) -> None:
        """Send one line."""
        self.raw(text.encode("latin-1") + b"\n")

    def raw(self, data: bytes) -> None:
        """Send bytes."""
        self.talk.bench.now_s += 0.001
        self.session.receive(data, self.talk.bench.now_s)
        self.talk.work()

    def read(self) -> str:
        """The oldest answer, '' where there is none."""
        return self.answers.pop(0) if self.answers else ""

    def ask(self, text: str) -> str:
        """Send a query and pass time until it is answered (at most 2 s)."""
        self.write(text)
        for _ in range(20):
            if self.answers:
                break
            self.talk.after(0.1)
        return self.read()

    def error(self) -> int:
        """The number of the oldest error."""
        return int(self.ask("SYST:ERR?").partition(",")[0])

    def errors(self) -> list[str]:
        """Every error, taken."""
        found = []
        while (text := self.ask("SYST:ERR?")) != '0,"No error"':
            found.append(text)
        return found

    def take_seat(self) -> "Client":
        """Ask for control, and get it."""
        assert self.ask("SYST:LOCK:REQ?") == "1"
        return self
