"""The screen without a terminal: status in lines, events as they come, for logs, pipes and screen readers."""

import math

from hvhost.publish import wording
from hvhost.publish.panes import EVENT_MARKS, inputs
from hvhost.publish.runpane import hold_clock, request_words
from hvhost.publish.snapshot import Snapshot
from hvhost.publish.wording import View, measured, printable, span

CANNOT_STOP = "this view cannot stop: use 'hvhost lower', 'hvhost cut' or the emergency switching off"
EVERY_S = 5.0
LONGEST = 1000  # columns: lines are folded by whoever reads them
CORNERS = 4


def reading_words(snapshot: Snapshot, view: View) -> str:
    """Return the reading with its uncertainty, marked when old, or that the output is unknown."""
    reading = snapshot.reading
    if reading is None or reading.volts is None or wording.output_unknown(snapshot, view):
        return "output unknown - use the emergency switching off"
    old = "OLD " if wording.reading_old(snapshot, view) else ""
    volts = measured(reading.volts, reading.u_volts, "V", snapshot.polarity)
    amps = "--" if reading.amps is None else measured(reading.amps, reading.u_amps, "A", snapshot.polarity)
    flags = "".join(f" {printable(flag).upper()}" for flag in reading.flags)
    return f"{old}{volts}, {amps}, k=2, age {reading.age_s + view.since_s:.2f} s{flags}"


def brief(snapshot: Snapshot, view: View) -> str:
    """Return one line: local time, state, voltage, reading, set-point, step, hold clock."""
    shown = wording.as_last_known(snapshot, view)
    parts = [wording.state_words(shown, view), wording.voltage_words(shown).lower(), reading_words(shown, view)]
    if shown.set_volts is not None:
        parts.append(f"set {wording.volts_scale(shown).text(shown.set_volts)}")
    run = shown.run
    if run is not None and not run.ended:
        parts.append(f"step {run.step_number}/{run.step_total} {printable(run.step_name)}".rstrip())
        if run.hold is not None:
            parts.append(hold_clock(run.hold, shown, view, 0).plain.lower())
        if run.expected_s is not None:
            parts.append(f"{span(run.expected_s - view.since_s)} to go")
    return f"{wording.clock_text(shown.utc_ns, view.zone)}  {'; '.join(parts)}"


def status_lines(snapshot: Snapshot, view: View) -> list[str]:
    """Return everything that matters, a line each."""
    shown = wording.as_last_known(snapshot, view)
    volts, amps = wording.volts_scale(shown), wording.amps_scale(shown)
    sign = wording.polarity_words(shown)
    rehearsal = ", REHEARSAL: a stand-in, no bench" if shown.rehearsal else ""
    lines = [f"{printable(shown.bench_title or shown.bench)}, {sign}{rehearsal}, "
             f"{wording.clock_text(shown.utc_ns, view.zone)}",
             "; ".join(filter(None, (wording.state_words(shown, view), wording.voltage_words(shown).lower(),
                                     printable(shown.power_words), wording.link_words(shown), shown.stop)))]
    lines += [f"## {alert}" for alert in wording.alerts(shown, view)]
    lines += [f"reading: {reading_words(shown, view)}",
              f"set-point {volts.text(shown.set_volts)}, ceiling {volts.text(shown.ceiling_volts)}; "
              f"current limit {amps.text(shown.set_amps)}, trip {amps.text(shown.trip_amps)}"]
    lines += _run_lines(shown, view)
    lines += [line.plain for line in inputs(shown, LONGEST, len(shown.inputs))]
    lines += [wording.seat_words(shown),
              f"record: {'ok' if shown.record.ok else 'FAILED'} {printable(shown.record.text)}".rstrip(),
              f"link: garbled {shown.quality.garbled}, gaps {shown.quality.gaps}, missed {shown.quality.missed}, "
              f"repeated {shown.quality.repeated}"]
    lines += [f"outlet {one.name}: lost {one.dropped + one.failed}, clients {one.clients}" for one in shown.outlets]
    lines += [f"next: {printable(act)}" for act in shown.next_acts]
    caution = wording.caution(shown)
    return [*lines, caution] if caution else lines


def _run_lines(shown: Snapshot, view: View) -> list[str]:
    lines = []
    if shown.arm is not None:
        lines.append(f"request: {', '.join(request_words(shown, shown.arm))}")
    if shown.run is not None:
        run = shown.run
        lines.append(f"{'last run' if run.ended else 'run'} {run.run_id}: {printable(run.plan or run.kind)}, specimen "
                     f"{printable(run.specimen) or '--'}, operator {printable(run.operator) or '--'}, step "
                     f"{run.step_number}/{run.step_total} {printable(run.step_text or run.step_name)}, {run.folder}")
        if run.hold is not None and not run.ended:
            lines.append(hold_clock(run.hold, shown, view, 0).plain)
    if shown.course:
        lines.append(f"to come: {_course(shown)}")
    if shown.evidence is not None:
        one = shown.evidence
        peak_v = max((point.v_max for point in one.points), default=math.nan)
        peak_a = max((point.i_max for point in one.points), default=math.nan)
        lines.append(f"last {one.kind}: snapshot {one.number} {printable(one.text)}, at most "
                     f"{wording.volts_scale(shown).text(peak_v)} and {wording.amps_scale(shown).text(peak_a)}")
    if shown.verdict_text:
        lines.append(f"verdict: {printable(shown.verdict_text)}")
    return lines


def _course(shown: Snapshot) -> str:
    """The next corners of the plan's course, from the present."""
    scale = wording.volts_scale(shown)
    corners = [f"{scale.text(point.volts)} in {wording.minutes(max(0.0, point.t_s - shown.now_s))}"
               for point in shown.course[1: 1 + CORNERS]]
    more = len(shown.course) - 1 - len(corners)
    return ", ".join(corners) + (f", and {more} more" if more > 0 else "")


class PlainFollower:
    """Chooses the lines to print as snapshots come: each new event, each change of state or alert, else every 5 s."""

    def __init__(self) -> None:
        self._event = -1
        self._state: tuple[object, ...] = ()
        self._told_s = float("-inf")

    def lines(self, snapshot: Snapshot, view: View, now_s: float) -> list[str]:
        """Return the lines that this snapshot adds."""
        lines = [f"{wording.local_time(one.utc_ns, view.zone, '%H:%M:%S.%f')[:-3]} {EVENT_MARKS[one.severity]} "
                 f"{printable(one.text)}" for one in snapshot.events if one.number > self._event]
        self._event = max([self._event, *(one.number for one in snapshot.events)])
        run = snapshot.run
        state = (snapshot.permission, snapshot.phase, snapshot.latched, snapshot.voltage, snapshot.link,
                 snapshot.stop, run.step_number if run else 0, wording.output_unknown(snapshot, view))
        if state != self._state or now_s - self._told_s >= EVERY_S:
            self._state, self._told_s = state, now_s
            lines += [brief(snapshot, view), *(f"## {alert}" for alert in wording.alerts(snapshot, view))]
        return lines
