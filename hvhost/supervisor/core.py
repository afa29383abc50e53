"""The one path: bytes -> frames -> blocks -> verdicts -> supervisor -> bytes, with time as an argument.

`Core.receive` is a generator: it yields the bytes that are due as soon as they are due, so that the caller writes a
cut before anything else is looked at.  The first half of `_block` is the protective call chain (judge, stop, renew);
everything after the yield - journal, runner, discharge, screens' figures - follows it.  Nothing here waits, logs to
a file or reads a clock; the same core runs on a serial port, under a virtual clock, and on a recording.

What belongs together lives beside this: `following` (judged blocks), `hearing` (events and answers), `linking`
(greeting and losing an MCU), `arming` and `driving` (a run), `moving` and `settling` (the two tables), `stopping`
(decided stops), `commands` (what people ask).
"""

from collections import deque
from collections.abc import Callable, Iterator, Mapping
from typing import Any

from hvhost.bench.model import Bench
from hvhost.guard.guard import Guard
from hvhost.guard.verdicts import Severity, Verdict
from hvhost.samples.assembler import Assembler
from hvhost.samples.blocks import SampleBlock
from hvhost.supervisor import commands, following, hearing, linking, moving, settling, stopping
from hvhost.supervisor.aftermath import AftermathReader
from hvhost.supervisor.catchup import EventBook
from hvhost.supervisor.discharge import Chain, Discharge
from hvhost.supervisor.evidence import Evidence
from hvhost.supervisor.notes import Measured
from hvhost.supervisor.runs import ActiveRun, Outcome, Stage, rule_word
from hvhost.supervisor.seat import Seat
from hvhost.supervisor.states import (
    LinkState,
    Move,
    Permission,
    State,
)
from hvhost.supervisor.telling import Teller
from hvhost.wire.events import BlockIn, GarbledIn, LinkEvent
from hvhost.wire.frames import Block
from hvhost.wire.greeting import Greeting, McuInfo
from hvhost.wire.link import Link
from hvhost.wire.vocabulary import Fitted, HostRule, Inputs, McuState
from hvhost.words.findings import Finding

LOOK_S = 0.25  # while anything is permitted, time alone steps the core at least this often
ARCS_KEPT = 16  # verdicts of breakdown whose sample is remembered, to tell who saw an arc
FRESH_KEPT = 512  # judged blocks that nobody has looked at yet: more than one read can hold
WRAP, HALF = 1 << 32, 1 << 31
# members by names of this module: reading one through its class costs as much as a call, and here it is every block
LOST, PAUSING = LinkState.LOST, int(McuState.PAUSING)
ARMED, RUN_LIVE, DISCHARGING = Stage.ARMED, Stage.LIVE, Stage.DISCHARGING
GROUND_OPEN = int(Inputs.GROUND_OPEN)  # plain: IntFlag arithmetic costs a microsecond, here for every block


class Core(Teller):
    """Everything that decides about one bench."""

    def __init__(self, bench: Bench, now_s: float, sessions: Callable[[], int]) -> None:
        super().__init__()
        self.bench, self._sessions = bench, sessions
        self.state = State()
        self.seat = Seat()
        self.run: ActiveRun | None = None
        self.evidence = Evidence()
        self.aftermath = AftermathReader()
        self.events = EventBook()
        self.late = False  # the event being heard was told late: it moves no state
        self.causes_asked = -1  # the last event when unknown causes were asked for
        self.settings_findings: tuple[Finding, ...] = ()
        self.greeting: Greeting | None = None
        self.known: McuInfo | None = None  # the board that this core serves, as it was greeted last
        self.link: Link | None = None
        self.link_text = "not connected"
        self.next_stop = 1 + sessions() % (1 << 30)  # random: an answer left in a buffer must not match
        self.relink_at: float | None = None
        self.silent = False  # no line for a lease, not yet believed
        self.assembler: Assembler | None = None
        self.guard: Guard | None = None
        self.sample: SampleBlock | None = None
        self.fresh: deque[SampleBlock] = deque(maxlen=FRESH_KEPT)  # for whoever shows every block
        self.sampled = False  # a block of this session was judged
        self.measured: Measured | None = None
        self.inputs = self.inputs_tick = 0
        self.arm_count = 0
        self.host_rule = 0
        self.recorder_ready = True
        self.interlock_opened = True  # since the last run
        self.block_s = self.awake_s = self._stepped_s = now_s
        self.fault = ""  # the last fault of ours that was told
        self.stop_decided_s: float | None = None  # of a cut that is not confirmed
        self.warning_ends_tick: int | None = None
        self.arm_open_s: float | None = None
        self.block_span_s = 0.0
        self.arcs_judged: deque[int] = deque(maxlen=ARCS_KEPT)  # sample indices, low 31 bits
        self.last_tick: int | None = None  # of the last block, as the wire counts
        self.t_s = 0.0  # ticks passed since the greeting, in seconds; runs on through wraps and runs
        self.judged: list[SampleBlock] = []  # and not followed yet; empty between two reads
        self.v_gain = abs(bench.voltage.monitor.gain)
        self.i_gain = abs(bench.current.monitor.gain)
        self.v_zero = self.i_zero = 0.0
        self.tells_ground = bool(bench.fitted & (Fitted.GROUND_STICK | Fitted.GROUND_SWITCH))
        self.settled: tuple[object, ...] = ()  # what the second table looked at when it last asked for nothing
        self.discharge = Discharge(Chain(
            touch_v=bench.touch_v, bleed_s=bench.bleed_s, bleeds=bench.bleeds,
            slew_v_per_s=max(bench.slew_v_per_s, bench.down_slew_v_per_s), u_zero_v=bench.voltage.monitor.u(0.0),
            measured_here=bench.monitor_powered_after_cut and bench.monitor_at_specimen))

    # ------------------------------------------------------------ the shell's side

    def connect(self, now_s: float) -> bytes:
        """The port is open: begin a new session and return its first bytes."""
        linking.begin(self, now_s)
        return self.take_output(now_s)

    def port_gone(self, now_s: float, reason: str) -> None:
        """The port is gone: whatever ran is interrupted, and nothing may be said about the voltage."""
        if self.link is not None:
            self.next_stop = self.link.next_stop
        self.link, self.relink_at = None, None
        linking.lose(self, now_s, f"port lost: {reason}")

    def receive(self, data: bytes, now_s: float) -> Iterator[bytes]:
        """Take bytes; yield what to write, each piece as soon as it is due.  A fault of ours on the way cuts."""
        try:
            yield from self._receive(data, now_s)
        except Exception as error:  # a core that cannot follow must not keep a bench energised by renewing its lease
            yield self._failed(error, now_s)

    def _receive(self, data: bytes, now_s: float) -> Iterator[bytes]:
        link = self.link
        if link is None:
            return
        self._step(now_s)
        for event in link.receive(data, now_s):
            if type(event) is BlockIn:
                yield from self._block(event.block, now_s)
            elif type(event) is GarbledIn:
                hearing.hear(self, event, now_s)
            else:
                yield from following.catch_up(self, now_s)
                yield from self._hear(event, now_s)
        yield from following.catch_up(self, now_s)

    def timer(self, now_s: float) -> bytes:
        """Step by time alone; return what to write.  A fault of ours on the way cuts."""
        self.journal.timer(now_s)
        try:
            return self._timer(now_s)
        except Exception as error:
            return self._failed(error, now_s)

    def _timer(self, now_s: float) -> bytes:
        link = self.link
        if link is None:
            return b""
        self._step(now_s)
        for event in link.timer(now_s):
            hearing.hear(self, event, now_s)
        linking.look_silent(self, now_s)
        if self.relink_at is not None and now_s >= self.relink_at:
            return self.connect(now_s)
        if (self.guard is not None and self.state.permission is not Permission.IDLE
                and now_s - self.awake_s >= self.bench.lease_s):
            verdicts = self.guard.check_time(now_s)
            self._stop_by(verdicts, now_s)
            self._tell(verdicts, now_s)
        self.settle(now_s)
        return self.take_output(now_s)

    def _failed(self, error: Exception, now_s: float) -> bytes:
        """A fault of ours behind the judgement: cut whatever is permitted, say it once, go on judging."""
        self.judged.clear()
        text = f"a fault of this program: {type(error).__name__}: {error}"
        if self.state.permission is not Permission.IDLE and not self.link_stopping:
            stopping.cut_for(self, HostRule.ASSERTION, now_s, text)
        if text != self.fault:
            self.fault = text
            self.say(now_s, "trip", text)
        return self.take_output(now_s)

    def deadline(self, now_s: float) -> float | None:
        """When `timer` next has something to do."""
        times = [t for t in (self.link.deadline() if self.link else None, self.relink_at) if t is not None]
        if self.silent:
            times.append(self.awake_s + self.bench.lease_s)
        if self.state.permission is not Permission.IDLE:
            times.append(max(self.block_s, self.awake_s) + self.bench.lease_s + 0.001)
            times.append(now_s + LOOK_S)
        return min(times, default=None)

    def take_output(self, now_s: float) -> bytes:
        """Return what is due on the wire now, journalled as sent."""
        if self.link is None:
            return b""
        data = self.link.take_output(now_s)
        if data:
            self.journal.sent(now_s, data)
        return data

    def command(self, now_s: float, name: str, args: Mapping[str, Any], who: str) -> dict[str, Any]:
        """Take one command; raises `CommandRefused`; what it puts on the wire is fetched by `take_output`."""
        self._step(now_s)
        commands.admit(self, name, args)
        self.journal.command(now_s, {"name": name, "args": dict(args), "who": who,
                                     "control": self.seat.holds(str(args.get("ticket", "")))})
        result = commands.COMMANDS[name](self, now_s, args, who)
        self.settle(now_s)
        return result

    def recorder_failed(self, now_s: float) -> None:
        """The recorder cannot go on: the second table lowers whatever runs."""
        self.recorder_ready = False
        self.settle(now_s)

    def opening_state(self) -> dict[str, Any]:
        """What a replay needs to begin where a run was opened."""
        return linking.opening_state(self)

    def resume(self, greeting: Greeting, state: Mapping[str, Any], now_s: float, link: Link) -> None:
        """Stand where `opening_state` was taken: for a replay."""
        linking.resume(self, greeting, state, now_s, link)

    def _step(self, now_s: float) -> None:
        """Notice a stall of the host itself: the silence before it says nothing about the MCU."""
        if now_s - self._stepped_s > self.bench.lease_s:
            self.awake_s = now_s
            if self.state.permission is not Permission.IDLE:
                self.say(now_s, "attention", f"the host stood still for {now_s - self._stepped_s:.2f} s")
        self._stepped_s = now_s

    # ------------------------------------------------------------ the protective call chain

    def _block(self, block: Block, now_s: float) -> Iterator[bytes]:
        link, assembler, guard = self.link, self.assembler, self.guard
        assert link is not None
        assert assembler is not None
        assert guard is not None
        sample = assembler.take(block, now_s)
        if sample is None:  # seen before, or older: counted, kept, not judged twice
            self.journal.block(now_s, block)
            return
        failed: Exception | None = None
        verdicts: tuple[Verdict, ...] = ()
        try:
            verdicts = guard.judge(sample)
            if verdicts:
                self._stop_by(verdicts, now_s)
        except Exception as error:  # a guard that cannot judge must not keep the lease alive
            failed = error
            link.cut(HostRule.ASSERTION, now_s)
        renewed = link.renew(sample.last_index & 0xFFFFFFFF, now_s)
        # what else is due leaves when the read is followed: a block that neither stops nor renews asks for nothing
        data = link.take_output(now_s) if renewed or verdicts or failed is not None else b""
        if data:
            yield data
        self.journal.block(now_s, block)
        if data:
            self.journal.sent(now_s, data)
        if verdicts or failed is not None:
            # the stop is out: what came before it is followed first, while the run still stands as it stood then
            yield from following.catch_up(self, now_s)
            if failed is not None:
                stopping.cut_for(self, HostRule.ASSERTION, now_s,
                                 f"the guard failed: {type(failed).__name__}: {failed}")
            self._tell(verdicts, now_s)
        self.judged.append(sample)
        if verdicts or failed is not None or len(self.judged) >= following.TOGETHER_MAX:
            yield from following.catch_up(self, now_s)

    def _stop_by(self, verdicts: tuple[Verdict, ...], now_s: float) -> None:
        """Turn verdicts into stops on the wire, at once."""
        link = self.link
        assert link is not None
        for verdict in verdicts:
            if verdict.severity is Severity.TRIP:
                link.cut(verdict.rule, now_s)
            elif verdict.severity is Severity.ARC:
                link.arc(verdict.index, now_s)

    def _tell(self, verdicts: tuple[Verdict, ...], now_s: float) -> None:
        """Write down what was judged, after the wire has it."""
        for verdict in verdicts:
            name = rule_word(verdict.rule)
            self.note(now_s, "verdict", rule=name, severity=str(verdict.severity), limit=verdict.limit,
                      measured=verdict.measured, index=verdict.index, tick=verdict.tick, text=verdict.text)
            if verdict.severity is Severity.EVENT:
                self.say(now_s, "attention", f"{name}: {verdict.text}")
                continue
            self.say(now_s, "trip", f"guard: {name}: {verdict.text}")
            if verdict.severity is Severity.ARC:
                self.arcs_judged.append(verdict.index & hearing.INDEX_BITS)
                continue
            self.host_rule = int(verdict.rule)
            stopping.decided(self, now_s)
            if self.run is not None and self.run.open:
                self.run.host_rule = int(verdict.rule)
                self.run.end(Outcome.TRIPPED, f"host: {name}: {verdict.text}")

    # ------------------------------------------------------------ what follows

    def _hear(self, event: LinkEvent, now_s: float) -> Iterator[bytes]:
        hearing.hear(self, event, now_s)
        self.settle(now_s)
        data = self.take_output(now_s)
        if data:
            yield data

    def mcu_in(self, mcu: McuState, tick: int, now_s: float) -> None:
        """The MCU reports this state, by an event or by a block at least as new as the last event."""
        moving.mcu_in(self, mcu, tick, now_s)

    def move(self, move: Move, now_s: float) -> None:
        """A move of our own (arm accepted, hold begun, ...)."""
        moving.move(self, move, now_s)

    def settle(self, now_s: float) -> None:
        """Run the second table to a fixed point."""
        settling.settle(self, now_s)

    # ------------------------------------------------------------ figures

    def new_session(self) -> int:
        """A session number that was not used before."""
        return self._sessions()

    @property
    def last_event(self) -> int:
        """Number of the last event of the MCU that is known."""
        return self.events.last

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

    def zeros(self, v_code: int, i_code: int) -> None:
        """Take the raw codes above which the assembler counts, and so the SI value of its zero."""
        self.v_zero = self.bench.voltage.monitor.value(v_code)
        self.i_zero = self.bench.current.monitor.value(i_code)

    def volts(self, code: float) -> float:
        """Oriented volts of an oriented code above zero."""
        return self.v_zero + self.v_gain * code

    def amps(self, code: float) -> float:
        """Oriented amps of an oriented code above zero."""
        return self.i_zero + self.i_gain * code

    def index_at(self, tick: int) -> int:
        """The index of the first sample at or after an unwrapped tick, from the last block's beat."""
        sample = self.sample
        if sample is None:
            return 0
        return sample.index + -(-(tick - sample.tick) // sample.sample_ticks)

    def time_at(self, tick: int) -> float:
        """Seconds of tick time at a tick, from the last block's."""
        if self.last_tick is None:
            return self.t_s
        return self.t_s + ((tick - self.last_tick + HALF) % WRAP - HALF) / self.tick_hz
