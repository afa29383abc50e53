"""Builds the snapshot from the core's state: the one place where what is known becomes what is shown."""

import math
from collections import deque
from collections.abc import Callable

from hvhost.bench.cautions import BEFORE_TOUCHING, NOT_A_SAFETY_DEVICE
from hvhost.plan.program import HoldStep
from hvhost.publish.course import Place, course_of, expected_s
from hvhost.publish.evidence import evidence_view
from hvhost.publish.inputs import input_views
from hvhost.publish.snapshot import (
    EVENTS_KEPT,
    ArmView,
    CoursePoint,
    EventLine,
    EvidenceView,
    HoldView,
    LinkQuality,
    LinkState,
    OutletView,
    Permission,
    Phase,
    Reading,
    RecordView,
    RunView,
    Severity,
    Snapshot,
    StopState,
    TrendBucket,
    VoltageState,
)
from hvhost.publish.spans import SpanKeeper
from hvhost.publish.trend import RecentKeeper, TrendKeeper, brief
from hvhost.samples.blocks import Flags, SampleBlock
from hvhost.supervisor import states as st
from hvhost.supervisor.core import Core
from hvhost.supervisor.driving import step_text
from hvhost.supervisor.notes import Doing
from hvhost.supervisor.runs import ActiveRun, Stage, told_causes
from hvhost.supervisor.stopping import cut_words
from hvhost.wire.vocabulary import Inputs, McuState

REQUEST_S = 30.0
FLAG_WORDS = {Flags.LIMIT_V: "voltage at converter limit", Flags.LIMIT_I: "current at converter limit",
              Flags.REVERSED_V: "voltage reversed", Flags.REVERSED_I: "current reversed", Flags.STALE: "stale",
              Flags.GAP: "gap", Flags.MISSED: "missed conversions"}
PERMISSIONS = {st.Permission.IDLE: (Permission.IDLE, Phase.NONE),
               st.Permission.REQUESTED: (Permission.REQUESTED, Phase.NONE),
               st.Permission.WARNING: (Permission.WARNING, Phase.NONE),
               st.Permission.RAMP: (Permission.RUNNING, Phase.RAMP),
               st.Permission.HOLD: (Permission.RUNNING, Phase.HOLD),
               st.Permission.RETREAT: (Permission.RUNNING, Phase.RETREAT),
               st.Permission.REST: (Permission.RUNNING, Phase.REST),
               st.Permission.PAUSING: (Permission.PAUSING, Phase.NONE),
               st.Permission.LOWERING: (Permission.LOWERING, Phase.NONE)}
COURSE_EVERY_S = 1.0  # the course is made anew so often, and at once when the run goes on to something else
TREND_EVERY_S = 1.0  # so are the buckets of the run and of the last minute: hundreds of numbers
RESTING = Doing.RESTING
FOLD_S = 0.1  # blocks of so long a time go into the trends together: well below a bucket
WAITING_MAX = 64  # blocks that wait for a picture before they are folded without one


class Composer:
    """Makes snapshots of one core; ``utc_of(now_s)`` gives UTC nanoseconds of a monotonic time."""

    def __init__(self, core: Core, utc_of: Callable[[float], int], *, port: str, rehearsal: bool) -> None:
        self.core, self.utc_of, self.port, self.rehearsal = core, utc_of, port, rehearsal
        self.trend, self.recent = TrendKeeper(), RecentKeeper()
        self._span = SpanKeeper()
        self._waiting: list[tuple[float, SampleBlock]] = []  # blocks that neither trend nor span has yet
        self.verdict_text = ""
        self.folder = ""
        self.record = RecordView()
        self._seq = 0
        self._lines: deque[EventLine] = deque(maxlen=EVENTS_KEPT)
        self._line_number = 0
        self._place = Place()
        self._course: tuple[CoursePoint, ...] = ()
        self._course_of: tuple[object, ...] = ()
        self._course_s = self._trend_s = -math.inf
        self._trend: tuple[TrendBucket, ...] = ()
        self._recent: tuple[TrendBucket, ...] = ()
        self._evidence: EvidenceView | None = None
        self._run_id = ""
        self.listeners: list[Callable[[SampleBlock], None]] = []  # each must return at once

    def look(self) -> None:
        """Take the blocks that came into the trend, and hand them to whoever listens; called after each read."""
        core, fresh = self.core, self.core.fresh
        while fresh:
            sample = fresh.popleft()
            self._waiting.append((core.block_s, sample))
            for listener in self.listeners:
                listener(sample)
        if len(self._waiting) >= WAITING_MAX:
            self._fold()
        self._look_at_run()
        self._look_at_evidence()

    def _fold(self) -> None:
        """Take the blocks that wait into trend and span: with each picture, not with each read."""
        until_s = -math.inf
        v_low = v_high = i_low = i_high = 0
        before_s = 0.0
        for t_s, sample in self._waiting:
            low, high, least, most = sample.extremes
            if t_s > until_s:
                if until_s > -math.inf:
                    self._draw(before_s, v_low, v_high, i_low, i_high)
                until_s = t_s + FOLD_S
                v_low, v_high, i_low, i_high = low, high, least, most
            else:
                v_low, v_high = min(v_low, low), max(v_high, high)
                i_low, i_high = min(i_low, least), max(i_high, most)
            before_s = t_s
        if until_s > -math.inf:
            self._draw(before_s, v_low, v_high, i_low, i_high)
        self._span_of([sample for _, sample in self._waiting])
        self._waiting.clear()

    def _span_of(self, samples: list[SampleBlock]) -> None:
        """Add what came to the span, blocks that follow each other without a flag as one."""
        row: list[SampleBlock] = []
        after = -1
        for sample in samples:
            if row and (sample.index != after or sample.flags or sample.gap):
                self._add_row(row)
                row = []
            row.append(sample)
            after = -1 if sample.flags else sample.index + len(sample.v)
        if row:
            self._add_row(row)

    def _add_row(self, row: list[SampleBlock]) -> None:
        core, first = self.core, row[0]
        pairs = sum([len(sample.v) for sample in row])
        v_mean = sum([sample.sums[0] for sample in row]) / pairs
        i_mean = sum([sample.sums[1] for sample in row]) / pairs
        lows, highs, least, most = zip(*[sample.extremes for sample in row], strict=True)
        self._span.add(first.index, pairs, gap=first.gap, flagged=int(first.flags) != 0,
                       volts=(core.volts(min(lows)), core.volts(v_mean), core.volts(max(highs))),
                       amps=(core.amps(min(least)), core.amps(i_mean), core.amps(max(most))))

    def _draw(self, t_s: float, v_low: int, v_high: int, i_low: int, i_high: int) -> None:
        """Add extreme codes over at most ``FOLD_S`` to both trends."""
        core = self.core
        extremes = (t_s, core.volts(v_low), core.volts(v_high), core.amps(i_low), core.amps(i_high))
        self.trend.add(*extremes)
        self.recent.add(*extremes)

    def clear_trend(self) -> None:
        """A run is opened: its trend begins with it."""
        self._fold()
        self.trend.clear()

    def snapshot(self, now_s: float, outlets: tuple[OutletView, ...] = ()) -> Snapshot:
        """Return the whole picture at this time."""
        core, bench = self.core, self.core.bench
        self._fold()
        self._seq += 1
        permission, phase = PERMISSIONS[core.state.permission]
        if permission is Permission.REQUESTED and core.sample is not None and core.sample.state == McuState.PROVING:
            permission = Permission.PROVING
        run, sample = core.run, core.sample
        reading = self._reading(now_s)
        set_volts = bench.voltage.program.value(sample.v_word) if sample else None
        course = self._course_now(now_s, set_volts)
        self._renew_trends(now_s)
        return Snapshot(
            utc_ns=self.utc_of(now_s), now_s=now_s, seq=self._seq, bench=bench.name, bench_title=bench.title,
            polarity=bench.polarity, rehearsal=self.rehearsal, port=self.port,
            link=LinkState(core.state.link.value), link_text=core.link_text, permission=permission, phase=phase,
            latched=latched_words(core), voltage=self._voltage(), voltage_text=voltage_text(core),
            power_words=power_words(core), inhibits_without_mcu=bench.inhibits_when_mcu_absent,
            stop=StopState(cut_words(core, now_s)),
            set_volts=set_volts,
            set_amps=bench.current.program.value(sample.i_word) if sample else None, reading=reading,
            span=self._span.take() if outlets else self._span.so_far,  # a picture for no outlet takes nothing from them
            block_s=core.block_span_s or 0.032, lease_s=bench.lease_s, volts_full=bench.v_max, amps_full=bench.i_max,
            ceiling_volts=run.spec.program.v_highest if run and run.stage is not Stage.CLOSED else bench.v_max,
            trip_amps=_trip_amps(core), inputs=input_views(core), run=self._run(run, course, now_s),
            arm=self._arm(run, now_s),
            pause_s=run.runner.pause_left_s() if run else None, warning_s=self._warning(), seat=seat_words(core),
            stopped_by=core.seat.stopped_by, events=self._events(), trend=self._trend,
            recent=self._recent, course=course, evidence=self._evidence, next_acts=next_acts(core),
            cautions=(BEFORE_TOUCHING, NOT_A_SAFETY_DEVICE), discharge_text="",
            bleeds_passed=self._bleeds(), verdict_text=self.verdict_text, quality=self._quality(),
            record=self.record, outlets=outlets)

    def _voltage(self) -> VoltageState:
        core = self.core
        if core.state.voltage is st.Voltage.UNKNOWN and core.state.link in (st.LinkState.GREETED,
                                                                           st.LinkState.OBSERVE):
            if core.discharge.lost:
                return VoltageState.LOST
            if not core.discharge.provable and core.discharge.cut_s is not None:
                return VoltageState.NOT_MEASURED
        return VoltageState(core.state.voltage.value)

    def _reading(self, now_s: float) -> Reading | None:
        core = self.core
        sample, measured = core.sample, core.measured
        if sample is None or measured is None or core.state.link is st.LinkState.LOST:
            return None
        age_s = max(0.0, now_s - core.block_s)
        if age_s > core.bench.lease_s:  # S13: older than the lease is not shown at all
            return None
        volts, amps = core.bench.voltage.monitor, core.bench.current.monitor
        return Reading(
            volts=measured.volts, amps=measured.amps, u_volts=volts.u(max(0.0, measured.volts)),
            u_amps=amps.u(max(0.0, measured.amps)), volts_min=core.volts(min(sample.v)),
            volts_max=core.volts(max(sample.v)), amps_min=core.amps(min(sample.i)), amps_max=core.amps(max(sample.i)),
            age_s=age_s, flags=tuple(word for flag, word in FLAG_WORDS.items() if sample.flags & flag))

    def _look_at_run(self) -> None:
        """Notice a new run, and where it stands: how long a step and a rest have lasted is not told by the runner."""
        run, sample = self.core.run, self.core.sample
        if run is None or sample is None:
            return
        if run.spec.run_id != self._run_id:
            self._run_id, self._place, self._evidence = run.spec.run_id, Place(), None
            self._fold()
            self.recent.clear()
            self._trend_s = -math.inf
        self._place.look(run.runner.at, run.runner.doing is RESTING and not sample.v_word, sample.last_tick)

    def _look_at_evidence(self) -> None:
        """Take the newest snapshot that was fetched, before it is handed over to be stored."""
        core = self.core
        if not core.evidence.ready or core.greeting is None:
            return
        newest, info = core.evidence.ready[-1], core.greeting.info
        if self._evidence is None or newest.number != self._evidence.number:
            ours = core.run is not None and core.run.spec.tag == newest.tag
            causes = ", ".join(latched_words(core)) if newest.kind == "trip" else ""
            text = causes if ours else "of an earlier run"
            self._evidence = evidence_view(newest, core.bench, info.sample_ticks / info.tick_hz, text)

    def _renew_trends(self, now_s: float) -> None:
        """Take the buckets anew, once a second; until then the very same tuples are handed on."""
        if now_s - self._trend_s >= TREND_EVERY_S:
            self._trend_s = now_s
            self._trend, self._recent = brief(self.trend.buckets()), brief(self.recent.buckets())

    def _course_now(self, now_s: float, set_volts: float | None) -> tuple[CoursePoint, ...]:
        """The course to come; made anew once a second and when the run goes on to something else."""
        core, run = self.core, self.core.run
        if run is None or run.stage in (Stage.DISCHARGING, Stage.CLOSED) or core.state.link is st.LinkState.LOST:
            self._course_of = ()
            return ()
        runner = run.runner
        of = (run.spec.run_id, core.state.permission, runner.at, runner.doing, runner.stretch, runner.set_point)
        if of != self._course_of or now_s - self._course_s >= COURSE_EVERY_S:
            self._course_of, self._course_s = of, now_s
            self._course = course_of(runner, core.state.permission, now_s, set_volts or 0.0,
                                     starts_s=self._warning() or 0.0, rested_s=self._place.rested_s(core.tick_hz))
        return self._course

    def _run(self, run: ActiveRun | None, course: tuple[CoursePoint, ...], now_s: float) -> RunView | None:
        if run is None:
            return None
        runner, spec = run.runner, run.spec
        step = runner.step
        elapsed = 0.0
        if run.energised_tick is not None and self.core.sample is not None:
            end = run.cut_tick if run.cut_tick is not None else self.core.sample.last_tick
            elapsed = max(0.0, (end - run.energised_tick) / self.core.tick_hz)
        hold = None
        if isinstance(step, HoldStep) and run.stage is Stage.LIVE:
            hold = HoldView(elapsed_s=runner.elapsed_s, required_s=step.hold_s, clock=str(step.clock),
                            at_most_s=step.at_most_s, inside=runner.inside, restarts=runner.holding.restarts,
                            begun=runner.inside or runner.elapsed_s > 0.0, volts=step.v, tolerance=step.tolerance,
                            step_s=self._place.step_s(self.core.tick_hz))
        return RunView(
            run_id=spec.run_id, kind=spec.kind, plan=spec.plan, specimen=spec.specimen, operator=spec.operator,
            step_number=min(runner.at + 1, len(spec.program.steps)), step_total=len(spec.program.steps),
            step_name=step.name if step else "", step_text=step_text(run), elapsed_s=elapsed,
            remaining_s=max(0.0, spec.program.duration_s - elapsed) if spec.kind == "plan" else None,
            expected_s=expected_s(course, now_s) if spec.kind == "plan" and run.energised_tick is not None else None,
            hold=hold,
            next_reading_s=runner.next_reading_s() if run.stage is Stage.LIVE else None, arcs=run.arcs,
            arcs_allowed=spec.program.reaction.count if spec.program.reaction else None, folder=self.folder,
            ended=run.ended)

    def _arm(self, run: ActiveRun | None, now_s: float) -> ArmView | None:
        if run is None or self.core.arm_open_s is None or self.core.state.permission is not st.Permission.REQUESTED:
            return None
        spec = run.spec
        return ArmView(plan=spec.plan, specimen=spec.specimen, volts_highest=spec.program.v_highest,
                       duration_s=spec.program.duration_s, asked_by=run.asked_by,
                       expires_s=max(0.0, REQUEST_S - (now_s - self.core.arm_open_s)),
                       press_needed=self.core.bench.arm_input,
                       simulated_press=self.rehearsal and self.core.bench.arm_input,
                       typed_name="" if self.core.bench.arm_input else spec.run_id)

    def _warning(self) -> float | None:
        core = self.core
        if core.warning_ends_tick is None or core.sample is None:
            return None
        return max(0.0, (core.warning_ends_tick - core.sample.last_tick) / core.tick_hz)

    def _bleeds(self) -> float | None:
        core = self.core
        return None if core.sample is None else core.discharge.bleeds_passed(core.time_at(core.sample.tick))

    def _events(self) -> tuple[EventLine, ...]:
        for line in self.core.log:
            if line.number > self._line_number:
                self._line_number = line.number
                self._lines.append(EventLine(utc_ns=self.utc_of(line.now_s), text=line.text,
                                             severity=Severity(line.severity), number=line.number))
        return tuple(self._lines)

    def _quality(self) -> LinkQuality:
        core = self.core
        counters = core.assembler.counters if core.assembler else None
        garbled = core.link.counters["garbled"] if core.link else 0
        if counters is None:
            return LinkQuality(garbled=garbled)
        return LinkQuality(garbled=garbled, gaps=counters.gaps, missed=counters.missed,
                           repeated=counters.repeated + counters.backward)


def latched_words(core: Core) -> tuple[str, ...]:
    """The latched causes in words, the host's with its rule."""
    return told_causes(core.state.latched, core.host_rule)


def voltage_text(core: Core) -> str:
    """Why the voltage is what it is; on the way down and in a pause not merely that the output is energised."""
    if core.state.voltage is st.Voltage.PRESENT:
        return {st.Permission.LOWERING: "the output is being lowered",
                st.Permission.PAUSING: "inhibited after an arc, power stays on"}.get(core.state.permission,
                                                                                     core.discharge.text)
    return core.discharge.text


def power_words(core: Core) -> str:
    """What stands behind zero: never 'off' where the supply stays powered."""
    if core.state.permission is not st.Permission.IDLE or core.state.link not in (st.LinkState.GREETED,
                                                                                 st.LinkState.OBSERVE):
        return ""
    if core.bench.programming_only:
        return "programmed to zero, supply still powered"
    if "relay" in core.bench.cut_path:
        return "supply power cut by the relay" if not core.inputs & Inputs.RELAY_BACK else "relay still closed"
    return "inhibited, supply still powered"


def seat_words(core: Core) -> str:
    """Who has control."""
    return core.seat.holder.name if core.seat.holder else ""


def _trip_amps(core: Core) -> float:
    run = core.run
    step = run.runner.step if run is not None and run.stage is Stage.LIVE else None
    if step is not None and step.limits.trip_a is not None:
        return min(step.limits.trip_a, core.bench.limits.overcurrent_a)
    return core.bench.limits.overcurrent_a


def next_acts(core: Core) -> tuple[str, ...]:
    """What may be done next, in the operator's words."""
    state, run = core.state, core.run
    if state.link in (st.LinkState.NONE, st.LinkState.LOST):
        return ("use the emergency switching off if anything may be energised", "restore the link")
    acts: list[str] = []
    if state.permission is st.Permission.REQUESTED:
        acts.append("press the arm input at the bench" if core.bench.arm_input else "wait: no arm input on this bench")
        acts.append("hvhost arm --cancel")
    elif state.permission in st.LIVE:
        acts += [] if state.permission is st.Permission.LOWERING else ["lower"]
        acts.append("cut")
    elif core.greeting is not None and core.greeting.settings is None:
        acts.append("hvhost commission, with the interlock open")  # without settings the MCU refuses a reset too
    elif state.latched:
        acts.append("reset by naming the causes: " + ", ".join(latched_words(core)))
    elif run is not None and run.stage is Stage.PREPARED:
        acts.append("arm")
    elif state.link is st.LinkState.OBSERVE:
        acts.append("hvhost commission")
    elif run is None or run.stage is Stage.CLOSED:
        acts.append("run a plan")
    if run is not None and run.stage is Stage.DISCHARGING:
        acts.insert(0, "wait for the discharge")
    return tuple(acts)
