"""The pieces of the screen, each a pure function from a snapshot to lines of text; :mod:`view` arranges them.

A pane returns what it has to say at a width; the arrangement clips what does not fit, so each says the weightiest
first.  Colour only repeats what words, capitals, marks or hatching say already; there is no green.
"""

from collections.abc import Sequence

from rich.cells import cell_len, set_cell_size
from rich.text import Text

from hvhost.publish import wording
from hvhost.publish.digits import best_size, big_lines
from hvhost.publish.snapshot import (
    EventLine,
    HoldView,
    InputJudgement,
    LinkState,
    RunView,
    Severity,
    Snapshot,
    StopState,
)
from hvhost.publish.plot import Plot, nice_top
from hvhost.publish.wording import Scale, View, fine, known, left, local_time, measured, printable, span

ALERT = "bold white on red"
STATE = "bold reverse"
OLD = "yellow"
HEAD = "reverse"
MARKS = {InputJudgement.OK: "ok", InputJudgement.NOT_OK: "!!", InputJudgement.UNKNOWN: "??"}
EVENT_MARKS = {Severity.NOTE: "  ", Severity.ATTENTION: "! ", Severity.TRIP: "!!"}
LABEL = 11  # columns of a trend's axis


def wrapped(text: str, width: int, most: int, mark: str = "") -> list[str]:
    """Return ``text`` broken at blanks into at most ``most`` lines; what is left over ends in an ellipsis."""
    lines, line = [], mark
    for word in text.split():
        joined = f"{line} {word}" if line and line != mark else f"{line}{word}"
        if cell_len(joined) <= width or not line.strip():
            line = joined
        else:
            lines.append(line)
            line = " " * len(mark) + word
    lines.append(line)
    if len(lines) > most:
        lines = [*lines[: most - 1], f"{lines[most - 1][: max(0, width - 1)]}…"] if most else []
    return lines


def header(snapshot: Snapshot, view: View, width: int) -> Text:
    """Bench, polarity, rehearsal, and the local time with offset and zone at the right; a long name gives way."""
    sign = "negative (-)" if snapshot.polarity < 0 else "positive (+)"
    name = printable(snapshot.bench_title or snapshot.bench)
    clock = wording.clock_text(snapshot.utc_ns, view.zone)
    badge = "  REHEARSAL: a stand-in, no bench" if snapshot.rehearsal else ""
    if cell_len(name) + len(sign) + len(badge) + len(clock) + 6 > width:
        clock, badge = clock[11:], badge[:11]
    end = f"  {sign}{badge}  {clock} "
    return Text(f" {cells(name, max(1, width - 1 - cell_len(end)))}{end}", style=HEAD)


def cells(text: str, width: int) -> str:
    """Return ``text`` in exactly ``width`` cells, with an ellipsis where it was longer."""
    return set_cell_size(text, width) if cell_len(text) <= width else set_cell_size(text, width - 1) + "…"


def state_line(snapshot: Snapshot, view: View, width: int) -> Text:
    """State, voltage, power, what became of a cut, link; a link that is as it should be gives way first."""
    words = f" {wording.state_words(snapshot, view)} "
    stop = "" if snapshot.stop is StopState.CUT_NOT_CONFIRMED else str(snapshot.stop)
    parts = [wording.voltage_words(snapshot), stop, printable(snapshot.power_words),
             wording.link_words(snapshot) if view.connected else "NO DAEMON"]
    rest = " · ".join(filter(None, parts))
    if view.connected and snapshot.link is LinkState.GREETED and len(words) + cell_len(rest) + 3 > width:
        rest = " · ".join(filter(None, parts[:-1]))
    return Text.assemble(" ", (words, STATE), (f"  {rest}", "bold"))


def readbacks(snapshot: Snapshot, view: View, width: int, rows: int) -> list[Text]:
    """Return kV and mA in large digits side by side, in at most ``rows``; hatched when old, none when unknown."""
    half = width // 2
    panes = [_large(snapshot, view, scale, value, half - 1, rows) for scale, value in _readings(snapshot)]
    taken = max(len(pane) for pane in panes)
    panes = [pane + [""] * (taken - len(pane)) for pane in panes]
    return [Text(f" {first:<{half - 1}} {second}", style=OLD if wording.reading_old(snapshot, view) else "bold")
            for first, second in zip(*panes, strict=True)]


def _readings(snapshot: Snapshot) -> tuple[tuple[Scale, float | None], tuple[Scale, float | None]]:
    reading = snapshot.reading
    return ((wording.volts_scale(snapshot), known(reading.volts) if reading else None),
            (wording.amps_scale(snapshot), known(reading.amps) if reading else None))


def _large(snapshot: Snapshot, view: View, scale: Scale, value: float | None, width: int, rows: int) -> list[str]:
    if value is None or wording.output_unknown(snapshot, view):
        words = wrapped(f"{scale.unit}: output unknown - use the emergency switching off", width - 2, rows)
        return ["", *words, ""][:rows]
    widest = f"{scale.number(-abs(snapshot.volts_full or 1.0) if scale.unit.endswith('V') else -snapshot.amps_full)}"
    number = scale.number(value).rjust(len(widest.lstrip("-")) + (snapshot.polarity < 0))
    size = best_size(number, width - len(scale.unit) - 2, rows)
    if size is None:
        return [f"{number} {scale.unit}"[:width]]
    drawn = big_lines(number, size, hatched=wording.reading_old(snapshot, view))
    drawn[-1] = f"{drawn[-1]} {scale.unit}"
    return drawn


def reading_line(snapshot: Snapshot, view: View) -> Text:
    """Return the reading with its expanded uncertainty, its age, its flags; or that there is none to show."""
    reading = snapshot.reading
    if reading is None or wording.output_unknown(snapshot, view):
        return Text(" readback: none younger than the lease", style="bold")
    sign = snapshot.polarity
    parts = [measured(value, u, unit, sign) for value, u, unit in (
        (reading.volts, reading.u_volts, "V"), (reading.amps, reading.u_amps, "A")) if value is not None]
    parts.append("k=2")
    age = f"age {reading.age_s + view.since_s:.2f} s"
    parts.insert(0, f"OLD READING, {age}" if wording.reading_old(snapshot, view) else f"readback {age}")
    parts += [printable(flag).upper() for flag in reading.flags]
    return Text(" " + "  ".join(parts), style=OLD if wording.reading_old(snapshot, view) else "")


def bars(snapshot: Snapshot, view: View, width: int) -> list[Text]:
    """Return a bar for volts and one for amps: readback filled, set-point S, limit L, and the room to the limit."""
    reading = None if wording.output_unknown(snapshot, view) else snapshot.reading
    quantities = (
        (wording.volts_scale(snapshot), known(reading.volts) if reading else None, snapshot.set_volts,
         snapshot.ceiling_volts, snapshot.volts_full, "ceiling"),
        (wording.amps_scale(snapshot), known(reading.amps) if reading else None, snapshot.set_amps,
         snapshot.trip_amps, snapshot.amps_full, "trip"),
    )
    words = [_margin(scale, value, set_point, limit, name) for scale, value, set_point, limit, _, name in quantities]
    cells = width - max(map(len, words)) - 9
    return [_bar(quantity, text, cells) for quantity, text in zip(quantities, words, strict=True)]


def _margin(scale: Scale, value: float | None, set_point: float | None, limit: float | None, name: str) -> str:
    room = None if value is None or limit is None else limit - value
    over = room is not None and room < 0.0
    margin = f"{'OVER by' if over else 'room'} {scale.size(room)}"
    return f"set {scale.text(set_point)}  {name} {scale.text(limit)}  {margin}"


def _bar(quantity: tuple[Scale, float | None, float | None, float | None, float, str], words: str, cells: int) -> Text:
    scale, value, set_point, limit, full, _ = quantity
    ends = [end for end in (known(full), known(limit), known(set_point)) if end is not None and end > 0.0]
    top = max(ends, default=1.0)
    filled = 0 if value is None else round(max(0.0, min(1.0, value / top)) * cells)
    drawn = list("█" * filled + "·" * (cells - filled))
    for mark, place in (("L", known(limit)), ("S", known(set_point))):
        if place is not None and cells > 0:
            drawn[max(0, round(max(0.0, min(1.0, place / top)) * cells) - 1)] = mark
    return Text(f" {scale.unit:<2} [{''.join(drawn)}] {words}", style="bold" if "OVER" in words else "")


def trends(snapshot: Snapshot, width: int, rows: int) -> list[Text]:
    """Return volts and amps over time side by side, extremes of each bucket, axis at the left."""
    half = width // 2
    buckets = snapshot.trend
    volts = _trend([(b.t_s, b.v_min, b.v_max) for b in buckets], wording.volts_scale(snapshot), half - 1, rows)
    amps = _trend([(b.t_s, b.i_min, b.i_max) for b in buckets], wording.amps_scale(snapshot), half - 1, rows)
    return [Text(f"{first:<{half}}{second}") for first, second in zip(volts, amps, strict=True)]


def _trend(points: Sequence[tuple[float, float, float]], scale: Scale, width: int, rows: int) -> list[str]:
    top = nice_top(max((high for _, _, high in points), default=0.0))
    unit = scale.unit[-1]
    begin_s, end_s = (points[0][0], points[-1][0]) if points else (0.0, 0.0)
    drawn = Plot(width - LABEL, rows, begin_s, end_s, top)
    drawn.spans(points)
    plot, over_s = drawn.lines(), end_s - begin_s
    labels = [""] * rows
    labels[-1] = "0"
    if rows > 2:
        labels[rows // 2] = f"over {span(over_s)}"
    labels[0] = _axis(top * scale.polarity, unit)
    return [f"{label[: LABEL - 1]:>{LABEL - 1}} {line}" for label, line in zip(labels, plot, strict=True)]


def _axis(value: float, unit: str) -> str:
    number, prefixed = fine(value, unit).split(" ")
    return f"{number.rstrip('0').rstrip('.') if '.' in number else number} {prefixed}"


def inputs(snapshot: Snapshot, width: int, rows: int) -> list[Text]:
    """Return the interlocks and other inputs by name: one a row where there are rows, else flowing.

    What hinders arming comes first.
    """
    wanted = sorted(snapshot.inputs, key=lambda one: one.judgement is InputJudgement.OK)
    if not wanted:
        return [Text("inputs: unknown", style="bold")]
    named = [(f"{printable(one.name)} {printable(one.state)}", one.judgement) for one in wanted]
    if len(named) <= rows:
        return [_input(f"{MARKS[judgement]} {text}", judgement) for text, judgement in named]
    lines: list[Text] = []
    for group in (InputJudgement.NOT_OK, InputJudgement.UNKNOWN, InputJudgement.OK):
        texts = [text for text, judgement in named if judgement is group]
        if texts and len(lines) < rows:
            flowing = wrapped(", ".join(texts), width, rows - len(lines), f"{MARKS[group]} ")
            lines += [_input(line, group) for line in flowing]
    return lines


def _input(text: str, judgement: InputJudgement) -> Text:
    return Text(text, style="" if judgement is InputJudgement.OK else "bold")


def run_lines(snapshot: Snapshot, view: View, width: int, rows: int) -> list[Text]:
    """Return what runs, or what is asked for: verdict, hold clock, step, readings, arcs, end, plan, specimen."""
    if snapshot.arm is not None:
        return _arm_lines(snapshot, rows)
    run, verdict = snapshot.run, []
    if snapshot.verdict_text:
        verdict = [Text(f"verdict: {printable(snapshot.verdict_text)}", style="bold")]
    if run is None:
        return [*verdict, Text("no run")]
    since_s = 0.0 if wording.output_unknown(snapshot, view) else view.since_s
    lines = [] if run.ended or run.hold is None else [hold_clock(run.hold, since_s, width)]
    step = f"step {run.step_number}/{run.step_total} {run.step_name}"
    timing = _timing(run, snapshot, view)
    who = [f"{'last run' if run.ended else 'run'} {run.run_id}: {run.plan or run.kind}",
           f"specimen {run.specimen or '--'}  operator {run.operator or '--'}"]
    if len(verdict) + len(lines) + 5 <= rows:
        texts = [*([f"{step}: {run.step_text}"] if run.step_total else []), timing, *who, run.folder]
    elif lines:
        texts = [f"{step}  {timing}", "  ".join(who)]
    elif run.step_total and not run.ended:
        texts = [f"{step}: {run.step_text}", timing, "  ".join(who)]
    else:
        texts = [f"{'  '.join(who)}  {timing}"]
    return [*verdict, *lines, *(Text(printable(text)) for text in texts if text)]


def _arm_lines(snapshot: Snapshot, rows: int) -> list[Text]:
    arm = snapshot.arm
    assert arm is not None
    highest = wording.volts_scale(snapshot).text(arm.volts_highest)
    lines = [f"REQUEST: {arm.plan}", f"specimen {arm.specimen}",
             f"highest {highest}  for {span(arm.duration_s)} at most", f"asked by {arm.asked_by}"]
    if arm.simulated_press:
        lines.append("the press is simulated (stand-in)")
    if len(lines) > rows:
        lines = ["  ".join(lines[:2]), "  ".join(lines[2:])]
    return [Text(printable(line), style="bold") for line in lines]


def hold_clock(hold: HoldView, since_s: float, width: int) -> Text:
    """Return the hold clock with its bar; it stands still while the mean is out of tolerance."""
    elapsed_s = min(hold.elapsed_s + (since_s if hold.inside else 0.0), hold.required_s)
    words = f"HOLD {span(elapsed_s)} of {span(hold.required_s)}"
    words += f" {hold.clock}" if hold.inside else " OUT OF TOLERANCE: clock stands"
    if hold.at_most_s is not None:
        words += f", at most {span(hold.at_most_s)}"
    cells = width - len(words) - 3
    if cells >= 6 and hold.required_s > 0.0:
        filled = int(elapsed_s / hold.required_s * cells)
        words += f" [{'█' * filled}{'·' * (cells - filled)}]"
    return Text(words, style="bold")


def _timing(run: RunView, snapshot: Snapshot, view: View) -> str:
    parts = []
    if run.next_reading_s is not None and not run.ended:
        parts.append(f"next reading in {left(run.next_reading_s - view.since_s)}")
    if run.arcs or run.arcs_allowed is not None:
        parts.append(f"arcs {run.arcs}" + (f" of {run.arcs_allowed} allowed" if run.arcs_allowed is not None else ""))
    if run.remaining_s is not None and not run.ended:
        end_ns = snapshot.utc_ns + int(run.remaining_s * 1e9)
        parts.append(f"{span(run.remaining_s - view.since_s)} left, ends {local_time(end_ns, view.zone, '%H:%M:%S')}")
    elif run.elapsed_s:
        parts.append(f"took {span(run.elapsed_s)}" if run.ended else f"for {span(run.elapsed_s)}")
    return "  ".join(parts)


def health(snapshot: Snapshot) -> Text:
    """Return the record, the link's counts and what outlets lost, and who has control."""
    quality, record = snapshot.quality, snapshot.record
    lost = sum(one.dropped + one.failed for one in snapshot.outlets)
    words = [f"record {'ok' if record.ok else 'FAILED'}{' ' + printable(record.text) if record.text else ''}",
             f"garbled {quality.garbled} gaps {quality.gaps} missed {quality.missed} lost {lost}",
             f"control {printable(snapshot.seat) or 'free'}"]
    return Text(" " + " · ".join(words), style="" if record.ok else "bold")


def events(snapshot: Snapshot, view: View, rows: int) -> list[Text]:
    """Return the last ``rows`` event lines, newest last."""
    return [_event(one, view) for one in snapshot.events[-rows:]] if rows > 0 else []


def _event(one: EventLine, view: View) -> Text:
    clock = local_time(one.utc_ns, view.zone, "%H:%M:%S.%f")[:-3]
    return Text(f" {clock} {EVENT_MARKS[one.severity]} {printable(one.text)}",
                style="" if one.severity is Severity.NOTE else "bold")


def next_line(snapshot: Snapshot, view: View) -> Text:
    """Return what may be done next, or what the last key led to."""
    if view.note:
        return Text(f" {printable(view.note)}", style="bold")
    acts = "  |  ".join(map(printable, snapshot.next_acts))
    return Text(f" next: {acts}" if acts else "")


def footer(view: View, width: int) -> Text:
    """Return the keys; a view that cannot stop says so."""
    if not view.can_stop:
        words = " THIS VIEW CANNOT STOP: use 'hvhost cut', 'hvhost lower' or the emergency switching off"
        return Text(words, style=HEAD)
    if not view.connected:
        return Text(" KEYS CANNOT STOP NOW: use the emergency switching off   q leave", style=ALERT)
    longer = " SPACE or c: cut at once   l: lower to zero, then cut   q: leave (what runs goes on)"
    shorter = " SPACE/c: cut at once   l: lower to zero   q: leave, run goes on"
    return Text(longer if len(longer) <= width else shorter, style=HEAD)
