"""The pieces of the screen, each a pure function from a snapshot to lines of text; :mod:`view` arranges them.

A pane returns what it has to say at a width; the arrangement clips what does not fit, so each says the weightiest
first.  Colour only repeats what words, capitals, marks or hatching say already; there is no green.
"""

from collections.abc import Sequence

from rich.cells import cell_len
from rich.text import Text

from hvhost.publish import wording
from hvhost.publish.digits import best_size, big_lines
from hvhost.publish.snapshot import EventLine, HoldView, InputJudgement, RunView, Severity, Snapshot
from hvhost.publish.trend import braille_plot, nice_top
from hvhost.publish.wording import Scale, View, fine, left, local_time, printable, span

ALERT = "bold white on red"
STATE = "bold reverse"
OLD = "yellow"
HEAD = "reverse"
MARKS = {InputJudgement.OK: "ok", InputJudgement.NOT_OK: "!!", InputJudgement.UNKNOWN: "??"}
EVENT_MARKS = {Severity.NOTE: "  ", Severity.ATTENTION: "! ", Severity.TRIP: "!!"}
LABEL = 8  # columns of a trend's axis


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
    """Bench, polarity, rehearsal, and the local time with offset and zone at the right."""
    sign = "negative (-)" if snapshot.polarity < 0 else "positive (+)"
    name = printable(snapshot.bench_title or snapshot.bench)
    clock = wording.clock_text(snapshot.utc_ns, view.zone)
    badge = " REHEARSAL: a stand-in, no bench " if snapshot.rehearsal else " "
    start = f" {name}  {sign} {badge}"
    room = width - cell_len(start) - len(clock) - 1
    if room < 1:
        clock = clock[11:]
        start = f" {name}  {sign} {' REHEARSAL ' if snapshot.rehearsal else ''}"
        room = width - cell_len(start) - len(clock) - 1
    return Text(f"{start}{' ' * max(1, room)}{clock} ", style=HEAD)


def state_line(snapshot: Snapshot, view: View) -> Text:
    """State, voltage, power, link."""
    unknown = wording.output_unknown(snapshot, view)
    line = Text(" ")
    line.append(f" {wording.state_words(snapshot) if view.connected else 'STATE UNKNOWN'} ", STATE)
    voltage = "VOLTAGE UNKNOWN" if unknown else wording.voltage_words(snapshot)
    parts = [voltage, wording.link_words(snapshot) if view.connected else "NO DAEMON"]
    if snapshot.power_words:
        parts.insert(1, printable(snapshot.power_words))
    line.append("  " + "  ·  ".join(parts), "bold")
    return line


def readbacks(snapshot: Snapshot, view: View, width: int, rows: int) -> list[Text]:
    """Return kV and mA in large digits side by side; hatched when old, no digits when unknown."""
    half = width // 2
    panes = [_large(snapshot, view, scale, value, half - 1, rows) for scale, value in _readings(snapshot)]
    return [Text(f" {first:<{half - 1}} {second}", style=OLD if wording.reading_old(snapshot, view) else "bold")
            for first, second in zip(*panes, strict=True)]


def _readings(snapshot: Snapshot) -> tuple[tuple[Scale, float | None], tuple[Scale, float | None]]:
    reading = snapshot.reading
    return ((wording.volts_scale(snapshot), reading.volts if reading else None),
            (wording.amps_scale(snapshot), reading.amps if reading else None))


def _large(snapshot: Snapshot, view: View, scale: Scale, value: float | None, width: int, rows: int) -> list[str]:
    if value is None or wording.output_unknown(snapshot, view):
        words = wrapped(f"{scale.unit}: output unknown - use the emergency switching off", width - 2, rows)
        above = (rows - len(words)) // 2
        return [""] * above + words + [""] * (rows - above - len(words))
    widest = f"{scale.number(-abs(snapshot.volts_full or 1.0) if scale.unit.endswith('V') else -snapshot.amps_full)}"
    number = scale.number(value).rjust(len(widest.lstrip("-")) + (snapshot.polarity < 0))
    size = best_size(number, width - len(scale.unit) - 2, rows)
    if size is None:
        return [f"{number} {scale.unit}"[:width], *[""] * (rows - 1)]
    drawn = big_lines(number, size, hatched=wording.reading_old(snapshot, view))
    drawn[-1] = f"{drawn[-1]} {scale.unit}"
    return drawn + [""] * (rows - len(drawn))


def reading_line(snapshot: Snapshot, view: View) -> Text:
    """Return the reading with its expanded uncertainty, its age, its flags; or that there is none to show."""
    reading = snapshot.reading
    if reading is None or wording.output_unknown(snapshot, view):
        return Text(" readback: none younger than the lease", style="bold")
    sign = snapshot.polarity
    volts, amps = fine(reading.volts, "V", sign), fine(reading.amps, "A", sign)
    parts = [f"{volts} ± {_expanded(reading.u_volts, 'V')}", f"{amps} ± {_expanded(reading.u_amps, 'A')} (k=2)"]
    age = f"age {reading.age_s + view.since_s:.2f} s"
    parts.insert(0, f"OLD READING, {age}" if wording.reading_old(snapshot, view) else f"readback {age}")
    parts += [printable(flag).upper() for flag in reading.flags]
    return Text(" " + "  ".join(parts), style=OLD if wording.reading_old(snapshot, view) else "")


def _expanded(u: float | None, unit: str) -> str:
    return "U not known" if u is None else fine(2.0 * u, unit)


def bars(snapshot: Snapshot, view: View, width: int) -> list[Text]:
    """Return a bar for volts and one for amps: readback filled, set-point S, limit L, and the room to the limit."""
    reading = None if wording.output_unknown(snapshot, view) else snapshot.reading
    volts, amps = wording.volts_scale(snapshot), wording.amps_scale(snapshot)
    return [
        _bar(volts, reading.volts if reading else None, snapshot.set_volts, snapshot.ceiling_volts,
             snapshot.volts_full, "ceiling", width),
        _bar(amps, reading.amps if reading else None, snapshot.set_amps, snapshot.trip_amps,
             snapshot.amps_full, "trip", width),
    ]


def _bar(scale: Scale, value: float | None, set_point: float | None, limit: float | None, full: float, name: str,
         width: int) -> Text:
    label = f" {scale.unit:<2} "
    room = None if value is None or limit is None else limit - value
    over = room is not None and room < 0.0
    words = f" set {scale.text(set_point)}  {name} {scale.text(limit)}  " \
            f"{'OVER by' if over else 'room'} {scale.size(room)}"
    cells = max(8, width - len(label) - 46)
    top = max(full, limit or 0.0, set_point or 0.0) or 1.0
    filled = 0 if value is None else max(0, min(cells, round(value / top * cells)))
    drawn = list("█" * filled + "·" * (cells - filled))
    for mark, place in (("L", limit), ("S", set_point)):
        if place is not None:
            drawn[max(0, min(cells - 1, round(place / top * cells) - 1))] = mark
    line = Text(f"{label}[")
    line.append("".join(drawn))
    line.append(f"]{words}", "bold" if over else "")
    return line


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
    plot = braille_plot(points, width - LABEL, rows, top)
    over_s = points[-1][0] - points[0][0] if points else 0.0
    labels = [""] * rows
    labels[-1] = "0"
    if rows > 2:
        labels[rows // 2] = span(over_s)
    labels[0] = _axis(top * scale.polarity, unit)
    return [f"{label[: LABEL - 1]:>{LABEL - 1}} {line}" for label, line in zip(labels, plot, strict=True)]


def _axis(value: float, unit: str) -> str:
    number, prefixed = fine(value, unit).split(" ")
    return f"{number.rstrip('0').rstrip('.') if '.' in number else number} {prefixed}"


def inputs(snapshot: Snapshot, width: int, rows: int) -> list[Text]:
    """Return the interlocks and other inputs by name: what hinders arming first, the rest in as few rows as needed."""
    wanted = sorted(snapshot.inputs, key=lambda one: one.judgement is InputJudgement.OK)
    if not wanted:
        return [Text("inputs: unknown")]
    texts = [(f"{MARKS[one.judgement]} {printable(one.name)}: {printable(one.state)}", one.judgement) for one in wanted]
    if len(texts) <= rows:
        return [_input(text, judgement) for text, judgement in texts]
    lines: list[Text] = []
    for text, judgement in texts:
        last = lines[-1] if lines else None
        if last is not None and last.cell_len + cell_len(text) + 3 <= width:
            last.append(" · ")
            last.append_text(_input(text, judgement))
        else:
            lines.append(_input(text, judgement))
    if len(lines) > rows:
        lines = [*lines[: rows - 1], Text(f"and {len(texts) - _shown(lines[: rows - 1])} more")]
    return lines


def _shown(lines: list[Text]) -> int:
    return sum(line.plain.count(" · ") + 1 for line in lines)


def _input(text: str, judgement: InputJudgement) -> Text:
    return Text(text, style="" if judgement is InputJudgement.OK else "bold")


def run_lines(snapshot: Snapshot, view: View, width: int) -> list[Text]:
    """Return what runs, or what is asked for: plan, specimen, step, hold clock, readings, arcs, end."""
    if snapshot.arm is not None:
        return _arm_lines(snapshot)
    run = snapshot.run
    if run is None:
        return [Text("no run"), *([Text(snapshot.verdict_text, style="bold")] if snapshot.verdict_text else [])]
    lines = [Text(f"{'last run' if run.ended else 'run'} {run.run_id}: {run.plan or run.kind}"),
             Text(f"specimen {run.specimen or '--'}  operator {run.operator or '--'}")]
    if snapshot.verdict_text:
        lines.insert(0, Text(f"verdict: {snapshot.verdict_text}", style="bold"))
    if run.step_total and not run.ended:
        lines.append(Text(f"step {run.step_number}/{run.step_total} {run.step_name} {run.step_text}".rstrip()))
    if run.hold is not None and not run.ended:
        lines.insert(0, hold_clock(run.hold, view.since_s, width))
    lines.append(Text(_timing(run, snapshot, view)))
    if run.folder:
        lines.append(Text(run.folder))
    return [Text(printable(line.plain), style=line.style) for line in lines]


def _arm_lines(snapshot: Snapshot) -> list[Text]:
    arm = snapshot.arm
    assert arm is not None
    highest = wording.volts_scale(snapshot).text(arm.volts_highest)
    lines = [f"REQUEST: {arm.plan}", f"specimen {arm.specimen}",
             f"highest {highest}  for {span(arm.duration_s)} at most", f"asked by {arm.asked_by}"]
    if arm.simulated_press:
        lines.append("the press is simulated (stand-in)")
    return [Text(printable(line), style="bold") for line in lines]


def hold_clock(hold: HoldView, since_s: float, width: int) -> Text:
    """Return the hold clock with its bar; it stands still while the mean is out of tolerance."""
    elapsed_s = min(hold.elapsed_s + (since_s if hold.inside else 0.0), hold.required_s)
    words = f"HOLD {span(elapsed_s)} of {span(hold.required_s)} {hold.clock}"
    if hold.at_most_s is not None:
        words += f", at most {span(hold.at_most_s)}"
    if not hold.inside:
        words += ", OUT OF TOLERANCE: clock stands"
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
    """Return who has control, the record, the link's counts and what outlets lost."""
    quality, record = snapshot.quality, snapshot.record
    words = [f"control: {printable(snapshot.seat) or 'free'}",
             f"record {'ok' if record.ok else 'FAILED'}{' ' + printable(record.text) if record.text else ''}",
             f"garbled {quality.garbled} gaps {quality.gaps} missed {quality.missed}"]
    lost = sum(one.dropped + one.failed for one in snapshot.outlets)
    words.append(f"outlets lost {lost}")
    line = Text(" " + " · ".join(words))
    if not record.ok:
        line.stylize("bold")
    return line


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
