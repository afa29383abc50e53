"""The one path: bytes -> frames -> blocks -> verdicts -> supervisor -> bytes, with time as an argument.

`Core.receive` is a generator: it yields the bytes that are due as soon as they are due, so that the caller writes a
cut before anything else is looked at.  The first half of `_block` is the protective call chain (judge, stop, renew);
everything after the yield - journal, runner, discharge, screens' figures - follows it.  Nothing here waits, logs to
a file or reads a clock; the same core runs on a serial port, under a virtual clock, and on a recording.
"""

from collections import deque
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, replace
from typing import Any

from hvhost.bench.model import Bench
from hvhost.bench.settings_from import compare_settings
from hvhost.guard.guard import Guard
from hvhost.guard.limits import limits_of
from hvhost.guard.verdicts import Severity, Verdict
from hvhost.samples.assembler import Assembler
from hvhost.samples.blocks import Orientation, SampleBlock
from hvhost.supervisor import arming, hearing
from hvhost.supervisor.discharge import Chain, Discharge
from hvhost.supervisor.evidence import Evidence
from hvhost.supervisor.journal import Journal, NoJournal
from hvhost.supervisor.runner import Measured
from hvhost.supervisor.runs import ActiveRun, Outcome, Stage
from hvhost.supervisor.seat import Seat
from hvhost.supervisor.states import (
    LIVE,
    MOVE_OF,
    Consequence,
    Facts,
    LinkState,
    Move,
    Permission,
    State,
    Voltage,
    moved,
    owed,
)
from hvhost.wire.events import BlockIn, CutState, Ended, Greeted, LinkEvent
from hvhost.wire.frames import Block, McuEvent, encode_answer
from hvhost.wire.greeting import Greeting
from hvhost.wire.link import Link
from hvhost.wire.vocabulary import Fitted, HostRule, Inputs, McuState
from hvhost.words.findings import Finding

LOG_KEPT = 200
CONFIRM_S = 1.0  # a cut not confirmed after this is told as such (S7)
RELINK_S = 0.5  # pause before a new session is tried


@dataclass(frozen=True, slots=True)
class LogLine:
    """One line for people: number, host monotonic time, how loud ('note', 'attention', 'trip'), text."""

    number: int
    now_s: float
    severity: str
    text: str


class Core:
    """Everything that decides about one bench."""

    def __init__(self, bench: Bench, now_s: float, sessions: Callable[[], int]) -> None:
        self.bench = bench
        self.journal: Journal = NoJournal()
        self.state = State()
        self.seat = Seat()
        self.run: ActiveRun | None = None
        self.log: deque[LogLine] = deque(maxlen=LOG_KEPT)
        self.evidence = Evidence()
        self.settings_findings: tuple[Finding, ...] = ()
        self.greeting: Greeting | None = None
        self.link: Link | None = None
        self.link_text = "not connected"
        self.assembler: Assembler | None = None
        self.guard: Guard | None = None
        self.sample: SampleBlock | None = None
        self.sampled = False  # a block of this session was judged
        self.measured: Measured | None = None
        self.inputs = 0
        self.last_event = 0
        self.arm_count = 0
        self.host_rule = 0
        self.recorder_ready = True
        self.asked_again = -1  # the last event when missing events were asked for
        self.interlock_opened = True  # since the last run
        self.block_s = now_s
        self.stop_decided_s: float | None = None
        self.warning_ends_tick: int | None = None
        self.replies: dict[int, str] = {}
        self.arm_open_s: float | None = None
        self.block_span_s = 0.0
        self._sessions = sessions
        self._next_stop = 1 + sessions() % (1 << 30)  # random: an answer left in a buffer must not match
        self._relink_at: float | None = None
        self._log_number = 0
        self._v_gain = abs(bench.voltage.monitor.gain)
        self._i_gain = abs(bench.current.monitor.gain)
        self._v_zero = self._i_zero = 0.0
        self.discharge = Discharge(Chain(
            touch_v=bench.touch_v, bleed_s=bench.bleed_s, bleeds=bench.bleeds,
            down_slew_v_per_s=bench.down_slew_v_per_s, u_zero_v=bench.voltage.monitor.u(0.0),
            measured_here=bench.monitor_powered_after_cut and bench.monitor_at_specimen))

    # ------------------------------------------------------------ the shell's side

    def connect(self, now_s: float) -> bytes:
        """The port is open: begin a new session and return its first bytes."""
        self.link = Link(now_s, session=self._sessions(), lease_ms=round(self.bench.lease_s * 1000),
                         first_stop=self._next_stop)
        self.block_s, self.sampled = now_s, False
        self._relink_at = None
        self.link_text = "greeting"
        return self.take_output(now_s)

    def port_gone(self, now_s: float, reason: str) -> None:
        """The port is gone: whatever ran is interrupted, and nothing may be said about the voltage."""
        if self.link is not None:
            self._next_stop = self.link.next_stop
        self.link, self._relink_at = None, None
        self._lose(now_s, f"port lost: {reason}")

    def receive(self, data: bytes, now_s: float) -> Iterator[bytes]:
        """Take bytes; yield what to write, each piece as soon as it is due."""
        link = self.link
        if link is None:
            return
        for event in link.receive(data, now_s):
            if type(event) is BlockIn:
                yield from self._block(event.block, now_s)
            else:
                yield from self._hear(event, now_s)

    def timer(self, now_s: float) -> bytes:
        """Step by time alone; return what to write."""
        self.journal.timer(now_s)
        if self.link is None:
            return b""
        for event in self.link.timer(now_s):
            hearing.hear(self, event, now_s)
        if self.guard is not None and self.state.permission is not Permission.IDLE:
            self._act(self.guard.check_time(now_s), now_s)
        if self._relink_at is not None and now_s >= self._relink_at:
            self._next_stop = self.link.next_stop
            return self.connect(now_s)
        arming.expire(self, now_s)
        self.settle(now_s)
        return self.take_output(now_s)

    def deadline(self, now_s: float) -> float | None:
        """When `timer` next has something to do."""
        times = [t for t in (self.link.deadline() if self.link else None, self._relink_at) if t is not None]
        if self.state.permission is not Permission.IDLE:
            times.append(self.block_s + self.bench.lease_s + 0.001)
            times.append(now_s + 0.25)
        return min(times, default=None)

    def take_output(self, now_s: float) -> bytes:
        """Return what is due on the wire now, journalled as sent."""
        if self.link is None:
            return b""
        data = self.link.take_output(now_s)
        if data:
            self.journal.sent(now_s, data)
        return data

    # ------------------------------------------------------------ the protective call chain

    def _block(self, block: Block, now_s: float) -> Iterator[bytes]:
        link, assembler, guard = self.link, self.assembler, self.guard
        assert link is not None
        assert assembler is not None
        sample = assembler.take(block, now_s)
        verdicts: tuple[Verdict, ...] = ()
        if sample is not None and guard is not None:
            verdicts = guard.judge(sample)
            if verdicts:
                self._stop_by(verdicts, now_s)
            link.renew(sample.last_index & 0xFFFFFFFF, now_s)
            data = link.take_output(now_s)
            if data:
                yield data
                self.journal.block(now_s, block)
                self.journal.sent(now_s, data)
                block = None  # type: ignore[assignment]
        if block is not None:
            self.journal.block(now_s, block)
        if sample is not None:
            self._tell(verdicts, now_s)
            self._follow(sample, now_s)
            data = self.take_output(now_s)
            if data:
                yield data

    def _stop_by(self, verdicts: tuple[Verdict, ...], now_s: float) -> None:
        """Turn verdicts into stops on the wire, at once."""
        link = self.link
        assert link is not None
        for verdict in verdicts:
            if verdict.severity is Severity.TRIP:
                link.cut(verdict.rule, now_s)
            elif verdict.severity is Severity.ARC:
                link.arc(verdict.index, now_s)

    def _act(self, verdicts: tuple[Verdict, ...], now_s: float) -> None:
        self._stop_by(verdicts, now_s)
        self._tell(verdicts, now_s)

    def _tell(self, verdicts: tuple[Verdict, ...], now_s: float) -> None:
        """Write down what was judged, after the wire has it."""
        for verdict in verdicts:
            name = HostRule(verdict.rule).name.lower().replace("_", " ")
            self.note(now_s, "verdict", rule=name, severity=str(verdict.severity), limit=verdict.limit,
                      measured=verdict.measured, index=verdict.index, tick=verdict.tick, text=verdict.text)
            if verdict.severity is Severity.EVENT:
                self.say(now_s, "attention", f"{name}: {verdict.text}")
                continue
            self.say(now_s, "trip", f"guard: {name}: {verdict.text}")
            if verdict.severity is Severity.TRIP:
                self.host_rule = int(verdict.rule)
                self.stopping(now_s)
                if self.run is not None:
                    self.run.host_rule = int(verdict.rule)
                    self.run.end(Outcome.TRIPPED, f"host: {name}: {verdict.text}")

    # ------------------------------------------------------------ what follows

    def _hear(self, event: LinkEvent, now_s: float) -> Iterator[bytes]:
        hearing.hear(self, event, now_s)
        self.settle(now_s)
        data = self.take_output(now_s)
        if data:
            yield data

    def _follow(self, sample: SampleBlock, now_s: float) -> None:
        """Everything about a judged block that is not protective."""
        self.sample, self.block_s, self.sampled = sample, now_s, True
        pairs = sample.pairs
        ticks = pairs * sample.sample_ticks
        self.measured = measured = Measured(
            index=sample.index, tick=sample.tick, ticks=ticks, pairs=pairs,
            volts=self._v_zero + self._v_gain * sum(sample.v) / pairs,
            amps=self._i_zero + self._i_gain * sum(sample.i) / pairs,
            volts_max=self._v_zero + self._v_gain * max(sample.v))
        if sample.inputs != self.inputs:
            hearing.inputs_changed(self, sample.inputs, now_s)
        if sample.event >= self.last_event:
            self.mcu_in(McuState(sample.state), sample.tick, now_s)
        if sample.latched and not self.state.latched:
            hearing.ask_events(self)
        run = self.run
        if run is not None:
            if run.stage is Stage.LIVE:
                run.runner.block(measured)
                arming.drive(self, run, now_s)
            elif run.stage is Stage.DISCHARGING:
                arming.close_when_discharged(self, run, now_s)
        self._voltage(measured)
        self.settle(now_s)

    def _voltage(self, measured: Measured) -> None:
        t_s = measured.tick / self.tick_hz
        grounded = bool(self.bench.fitted & (Fitted.GROUND_STICK | Fitted.GROUND_SWITCH)
                        and not self.inputs & Inputs.GROUND_OPEN)
        live = self.state.permission in LIVE
        voltage = self.discharge.take(t_s, measured.volts, self.bench.voltage.monitor.u(max(0.0, measured.volts)),
                                      live=live, grounded=grounded)
        if voltage is not self.state.voltage:
            self.state = replace(self.state, voltage=voltage)
            self.note(self.block_s, "voltage", state=str(voltage), text=self.discharge.text)

    def mcu_in(self, mcu: McuState, tick: int, now_s: float) -> None:
        """The MCU reports this state, by an event or by a block at least as new as the last event."""
        move = MOVE_OF[mcu]
        before = self.state.permission
        after = moved(before, move)
        if after is None:
            if self.link is not None and not self.link_stopping:
                self.say(now_s, "trip", f"the MCU reports {mcu.name.lower()} while {before} is permitted: cut")
                self.cut_for(HostRule.DISAGREEMENT, now_s)
            after = Permission.IDLE if mcu is McuState.OFF else before
        if after is not before:
            self.permit(after, now_s)
            if after is Permission.IDLE:
                arming.off(self, tick, now_s)

    def move(self, move: Move, now_s: float) -> None:
        """A move of our own (arm accepted, hold begun, ...)."""
        after = moved(self.state.permission, move)
        if after is not None and after is not self.state.permission:
            self.permit(after, now_s)

    def permit(self, permission: Permission, now_s: float) -> None:
        """Enter a permission and write it down."""
        self.state = replace(self.state, permission=permission)
        self.note(now_s, "state", permission=str(permission), link=str(self.state.link), latched=self.state.latched)

    def settle(self, now_s: float) -> None:
        """Run the second table to a fixed point."""
        for _ in range(len(Consequence)):
            run = self.run
            facts = Facts(
                run_open=run is not None, direct=run is not None and run.spec.kind == "direct",
                seat_empty_s=self.seat.empty_s(now_s), recorder_ready=self.recorder_ready,
                block_age_s=now_s - self.block_s, lease_s=self.bench.lease_s, stopping=self.link_stopping)
            asked = owed(self.state, facts)
            if not asked:
                return
            for consequence in asked:
                self._obey(consequence, now_s)

    def _obey(self, consequence: Consequence, now_s: float) -> None:
        match consequence:
            case Consequence.CUT_DISAGREEMENT:
                self.cut_for(HostRule.DISAGREEMENT, now_s)
            case Consequence.CUT_STALE:
                self.cut_for(HostRule.STALE, now_s)
            case Consequence.LOWER_RECORDER:
                self.lower_for(Outcome.RECORD_FAILED, "the recorder failed: the run is lowered", now_s)
            case Consequence.LOWER_SEAT:
                self.lower_for(Outcome.LOWERED, "nobody has had control for 10 s", now_s)
            case Consequence.END_INTERRUPTED:
                if self.run is not None:
                    self.run.end(Outcome.INTERRUPTED, self.link_text)
                    arming.close(self, self.run, now_s)
            case Consequence.PERMISSION_IDLE:
                self.permit(Permission.IDLE, now_s)
            case Consequence.VOLTAGE_UNKNOWN:
                self.discharge.unknown("no readback")
                self.state = replace(self.state, voltage=Voltage.UNKNOWN)

    # ------------------------------------------------------------ acts

    @property
    def link_stopping(self) -> bool:
        """True from the decision to stop until the wire has confirmed it."""
        return self.link is not None and self.link.stopping

    @property
    def tick_hz(self) -> int:
        """Ticks per second of the greeted MCU."""
        return self.greeting.info.tick_hz if self.greeting else 1

    @property
    def rate_hz(self) -> float | None:
        """Sample pairs per second of the greeted MCU."""
        return self.greeting.info.rate_hz if self.greeting else None

    def volts(self, code: float) -> float:
        """Oriented volts of an oriented code above zero."""
        return self._v_zero + self._v_gain * code

    def amps(self, code: float) -> float:
        """Oriented amps of an oriented code above zero."""
        return self._i_zero + self._i_gain * code

    def cut_for(self, rule: HostRule, now_s: float) -> None:
        """Decide to cut; the caller's output carries it."""
        if self.link is None:
            return
        self.link.cut(rule, now_s)
        self.stopping(now_s)
        if rule is not HostRule.OPERATOR:
            self.host_rule = int(rule)
            name = rule.name.lower().replace("_", " ")
            self.say(now_s, "trip", f"cut: {name}")
            if self.run is not None:
                self.run.host_rule = int(rule)
                self.run.end(Outcome.TRIPPED, f"host: {name}")

    def stopping(self, now_s: float) -> None:
        """Remember when a cut was decided, for the confirmation's time limit."""
        if self.stop_decided_s is None:
            self.stop_decided_s = now_s

    def lower_for(self, outcome: Outcome, why: str, now_s: float) -> None:
        """Decide to lower; the run ends with this outcome."""
        if self.link is None:
            return
        self.link.lower(now_s)
        self.say(now_s, "attention", f"lower: {why}")
        self.note(now_s, "stop", how="lower", why=why)
        if self.run is not None:
            self.run.end(outcome, why)

    def cut_words(self, now_s: float) -> str:
        """What became of the last cut, in the words of S7."""
        state = self.link.cut_state if self.link is not None else CutState.NONE
        if state is CutState.CONFIRMED:
            self.stop_decided_s = None
            return "" if self.state.permission in LIVE else "cut confirmed"
        if self.stop_decided_s is None:
            return ""
        if self.link is None or now_s - self.stop_decided_s > CONFIRM_S:
            return "cut not confirmed: use the emergency switching off"
        return "cut sent"

    # ------------------------------------------------------------ linking

    def greeted(self, event: Greeted, now_s: float) -> None:
        """The MCU has told what it is: compare its settings, take over its causes, follow its samples."""
        greeting = self.greeting = event.greeting
        info = greeting.info
        self.last_event, self.arm_count = info.event, info.arm
        self.state = replace(self.state, latched=info.causes)
        self.host_rule = info.rule
        settings = greeting.settings or self.bench.settings()
        findings = compare_settings(self.bench, greeting.settings) if greeting.settings else ()
        self.settings_findings = findings
        agreed = greeting.settings is not None and not findings
        self.state = replace(self.state, link=LinkState.GREETED if agreed else LinkState.OBSERVE)
        self.link_text = (f"greeted {info.firmware}, boot {info.boot}" if agreed else
                          "observe only: " + ("settings blank or damaged" if greeting.settings is None
                                              else "; ".join(f.text for f in findings)))
        self._v_zero = self.bench.voltage.monitor.value(settings["vzero"])
        self._i_zero = self.bench.current.monitor.value(settings["izero"])
        self.block_span_s = info.block_pairs * info.sample_ticks / info.tick_hz
        self.fresh_judgement()
        self.say(now_s, "note" if agreed else "attention", self.link_text)
        if info.causes:
            self.say(now_s, "attention", f"latched: {', '.join(info.cause_words)}")
        if info.snapshot:
            self.evidence.begin(self, info.snapshot)

    def fresh_judgement(self) -> None:
        """Begin samples and guard anew (at a greeting, and at a run's opening so that a replay can begin there)."""
        assert self.greeting is not None
        info = self.greeting.info
        orientation = Orientation.of(self.greeting.settings or self.bench.settings(), info)
        self.assembler = Assembler(orientation, info.tick_hz, info.sample_ticks, stale_s=self.bench.lease_s)
        self.guard = Guard(limits_of(self.bench, None, None, rate_hz=info.rate_hz))

    def opening_state(self) -> dict[str, Any]:
        """What a replay needs to begin where a run was opened."""
        assert self.link is not None
        return {"link": self.link.numbers(), "last_event": self.last_event, "arm_count": self.arm_count,
                "latched": self.state.latched, "host_rule": self.host_rule, "inputs": self.inputs,
                "interlock_opened": self.interlock_opened, "seat_held": self.seat.holder is not None}

    def resume(self, greeting: Greeting, state: Mapping[str, Any], now_s: float, link: Link) -> None:
        """Stand where `opening_state` was taken: for a replay."""
        self.link, self.block_s, self.sampled = link, now_s, True
        self.greeted(Greeted(greeting), now_s)
        self.last_event, self.arm_count = int(state["last_event"]), int(state["arm_count"])
        self.host_rule, self.inputs = int(state["host_rule"]), int(state["inputs"])
        self.interlock_opened = bool(state["interlock_opened"])
        self.state = replace(self.state, latched=int(state["latched"]))

    def ended(self, event: Ended, now_s: float) -> None:
        """The session is over: what ran is interrupted; a new session is tried after a pause."""
        self._lose(now_s, f"{event.why}: {event.text}" if event.text else str(event.why))
        self._relink_at = now_s + RELINK_S

    def _lose(self, now_s: float, text: str) -> None:
        self.link_text = text
        self.say(now_s, "trip" if self.state.permission is not Permission.IDLE else "attention", f"link lost: {text}")
        self.state = replace(self.state, link=LinkState.LOST)
        if self.run is not None and not self.run.ended:
            self.run.end(Outcome.INTERRUPTED, text)
        self.settle(now_s)
        if self.run is not None:
            arming.close(self, self.run, now_s)

    # ------------------------------------------------------------ telling

    def say(self, now_s: float, severity: str, text: str) -> None:
        """Add a line for people, and keep it in the record."""
        self._log_number += 1
        self.log.append(LogLine(self._log_number, now_s, severity, text))
        self.note(now_s, "event", severity=severity, text=text)

    def note(self, now_s: float, what: str, **data: Any) -> None:
        """Write down a conclusion."""
        self.journal.note(now_s, {"what": what, "t_mono": now_s, **data})

    def heard(self, frame: McuEvent, now_s: float) -> None:
        """Journal a line of the MCU that is no block."""
        self.journal.line(now_s, encode_answer(frame))

    def index_at(self, tick: int) -> int:
        """The index of the first sample at or after an unwrapped tick, from the last block's beat."""
        sample = self.sample
        if sample is None:
            return 0
        return sample.index + -(-(tick - sample.tick) // sample.sample_ticks)

    def reply(self, ticket: int, text: str) -> None:
        """Keep how a request ended, for whoever asked; the oldest go first."""
        self.replies[ticket] = text
        while len(self.replies) > 64:
            del self.replies[next(iter(self.replies))]

    def command(self, now_s: float, name: str, args: Mapping[str, Any], who: str) -> dict[str, Any]:
        """Take one command; raises `CommandRefused`; what it puts on the wire is fetched by `take_output`."""
        from hvhost.supervisor.commands import obey

        self.journal.command(now_s, {"name": name, "args": dict(args), "who": who})
        result = obey(self, now_s, name, args, who)
        self.settle(now_s)
        return result

