"""The pieces of the screen, each a pure function from a snapshot to lines of text; :mod:`view` arranges them.

A pane returns what it has to say at a width; the arrangement clips what does not fit, so each says the weightiest
first.  Colour only repeats what words, capitals, marks or hatching say already; there is no green.
"""

from rich.cells import cell_len
from rich.text import Text

from hvhost.publish import wording
from hvhost.publish.digits import best_size, big_lines
from hvhost.publish.folding import cells, joined, wrapped
from hvhost.publish.snapshot import (
    EventLine,
    InputJudgement,
    LinkState,
    Permission,
    Severity,
    Snapshot,
    StopState,
)
from hvhost.publish.wording import Scale, View, known, local_time, measured, printable

ALERT = "bold white on red"
STATE = "bold reverse"
OLD = "yellow"
HEAD = "reverse"
MARKS = {InputJudgement.OK: "ok", InputJudgement.NOT_OK: "!!", InputJudgement.UNKNOWN: "??"}
EVENT_MARKS = {Severity.NOTE: "  ", Severity.ATTENTION: "! ", Severity.TRIP: "!!"}
HINDERED = frozenset((Permission.IDLE, Permission.REQUESTED, Permission.PROVING))
MOST_FOLDED = 3  # rows of one event
LEAST_HEALTH = 2  # control and record; what else there is gives way from its end


def header(snapshot: Snapshot, view: View, width: int) -> Text:
    """Bench, polarity, rehearsal, and the local time with offset and zone at the right; a long name gives way."""
    sign = wording.polarity_words(snapshot)
    name = printable(snapshot.bench_title or snapshot.bench)
    clock = wording.clock_text(snapshot.utc_ns, view.zone)
    badge = "  REHEARSAL: a stand-in, no bench" if snapshot.rehearsal else ""
    brief, hour = badge[:11], clock[11:]
    ends = [f"  {sign}{badge}  {clock} ", f"  {sign}{brief}  {hour} ", f"  {sign[-3:]}{brief}  {hour} "]
    end = next((one for one in ends if cell_len(name) + len(one) < width), ends[-1])
    return Text(f" {cells(name, max(1, width - 1 - cell_len(end)))}{end}", style=HEAD)


def state_lines(snapshot: Snapshot, view: View, width: int, rows: int) -> list[Text]:
    """State, voltage, what became of a cut, power, link; a link as it should be gives way before they are folded."""
    words = f" {wording.state_words(snapshot, view)} "
    stop = "" if snapshot.stop is StopState.CUT_NOT_CONFIRMED else str(snapshot.stop)
    parts = [part for part in (wording.voltage_words(snapshot), stop, printable(snapshot.power_words)) if part]
    link = wording.link_words(snapshot) if view.connected else "NO DAEMON"
    room = width - len(words) - 4
    if not view.connected or snapshot.link is not LinkState.GREETED or \
            cell_len(" · ".join([*parts, link])) <= room:
        parts.append(link)
    first, *more = joined(parts, " · ", max(1, room), max(1, rows))
    return [Text.assemble(" ", (words, STATE), (f"  {first}", "bold")),
            *(Text(f"{' ' * (len(words) + 3)}{line}", style="bold") for line in more)]


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
    room = width - max(map(len, words)) - 9
    return [_bar(quantity, text, room) for quantity, text in zip(quantities, words, strict=True)]


def _margin(scale: Scale, value: float | None, set_point: float | None, limit: float | None, name: str) -> str:
    room = None if value is None or limit is None else limit - value
    over = room is not None and room < 0.0
    margin = f"{'OVER by' if over else 'room'} {scale.size(room)}"
    return f"set {scale.text(set_point)}  {name} {scale.text(limit)}  {margin}"


def _bar(quantity: tuple[Scale, float | None, float | None, float | None, float, str], words: str, room: int) -> Text:
    scale, value, set_point, limit, full, _ = quantity
    ends = [end for end in (known(full), known(limit), known(set_point)) if end is not None and end > 0.0]
    top = max(ends, default=1.0)
    filled = 0 if value is None else round(max(0.0, min(1.0, value / top)) * room)
    drawn = list("█" * filled + "·" * (room - filled))
    for mark, place in (("L", known(limit)), ("S", known(set_point))):
        if place is not None and room > 0:
            drawn[max(0, round(max(0.0, min(1.0, place / top)) * room) - 1)] = mark
    return Text(f" {scale.unit:<2} [{''.join(drawn)}] {words}", style="bold" if "OVER" in words else "")


def inputs(snapshot: Snapshot, width: int, rows: int, *, listed: bool = True) -> list[Text]:
    """Return the interlocks and other inputs by name: ``listed`` one a row where there are rows, else flowing.

    What is not as it should be comes first and says in words that it hinders arming.
    """
    wanted = sorted(snapshot.inputs, key=lambda one: one.judgement is InputJudgement.OK)
    if not wanted:
        return [Text("inputs: unknown", style="bold")][:rows]
    hinders = snapshot.permission in HINDERED
    named = [(f"{printable(one.name)} {printable(one.state)}", one.judgement) for one in wanted]
    before = {InputJudgement.NOT_OK: "hinders arming: " if hinders else "NOT AS IT MUST BE: "}
    lines = [_input(line, judgement) for text, judgement in named
             for line in wrapped(before.get(judgement, "") + text, width, 2, f"{MARKS[judgement]} ")]
    if listed and len(lines) <= rows:
        return lines
    lines = []
    for group in (InputJudgement.NOT_OK, InputJudgement.UNKNOWN, InputJudgement.OK):
        texts = [text for text, judgement in named if judgement is group]
        if texts and len(lines) < rows:
            flowing = joined([before.get(group, "") + texts[0], *texts[1:]], ", ", width, rows - len(lines),
                             f"{MARKS[group]} ")
            lines += [_input(line, group) for line in flowing]
    return lines


def _input(text: str, judgement: InputJudgement) -> Text:
    return Text(text, style="" if judgement is InputJudgement.OK else "bold")


def health(snapshot: Snapshot, width: int, rows: int) -> list[Text]:
    """Return the record, the link's counts, what outlets lost, who has control, and how late the daemon's loop was."""
    quality, record = snapshot.quality, snapshot.record
    lost = sum(one.dropped + one.failed for one in snapshot.outlets)
    counts = [f"{name} {count}" for name, count in (
        ("garbled", quality.garbled), ("gaps", quality.gaps), ("missed", quality.missed),
        ("repeated", quality.repeated), ("lost by outlets", lost)) if count]
    words = [wording.seat_words(snapshot),
             f"record ok {printable(record.text)}".rstrip() if record.ok else "record FAILED",  # an alert says why
             ", ".join(counts) or "nothing lost"]
    if snapshot.loop.recent_s > 0.0:
        words.append(f"daemon late by {wording.minutes(snapshot.loop.recent_s)} at most")
    while len(words) > LEAST_HEALTH and len(joined(words, " · ", width - 1, rows + 1)) > rows:
        words.pop()
    lines = joined(words, " · ", width - 1, rows)
    return [Text(f" {line}", style="" if record.ok and not snapshot.stopped_by else "bold") for line in lines]


def events(snapshot: Snapshot, view: View, width: int, rows: int) -> list[Text]:
    """Return the newest event lines that fit, newest last; a long one takes up to three rows."""
    lines: list[Text] = []
    for one in reversed(snapshot.events):
        folded = _event(one, view, width, min(MOST_FOLDED, rows - len(lines)))
        lines = [*folded, *lines]
        if len(lines) >= rows:
            break
    return lines[-rows:] if rows > 0 else []


def _event(one: EventLine, view: View, width: int, most: int) -> list[Text]:
    clock = local_time(one.utc_ns, view.zone, "%H:%M:%S.%f")[:-3]
    mark = f" {clock} {EVENT_MARKS[one.severity]} "
    lines = wrapped(printable(one.text), width, max(1, most), mark)
    return [Text(line, style="" if one.severity is Severity.NOTE else "bold") for line in lines]


def next_lines(snapshot: Snapshot, view: View, width: int, rows: int) -> list[Text]:
    """Return what may be done next, or what the last key led to."""
    if view.note:
        return [Text(f" {line}", style="bold") for line in wrapped(printable(view.note), width - 1, rows)]
    acts = [printable(act) for act in snapshot.next_acts]
    return [Text(f" {line}") for line in joined(["next: " + acts[0], *acts[1:]], "  |  ", width - 1, rows)] if acts \
        else [Text("")]


def footer(view: View, width: int) -> Text:
    """Return the keys; a view that cannot stop says so."""
    if not view.can_stop:
        words = " THIS VIEW CANNOT STOP: use 'hvhost cut', 'hvhost lower' or the emergency switching off"
        return Text(words if cell_len(words) <= width else " THIS VIEW CANNOT STOP: use the emergency switching off",
                    style=HEAD)
    if not view.connected:
        return Text(" KEYS CANNOT STOP NOW: use the emergency switching off   q leave", style=ALERT)
    bell = "on" if view.bell else "silent"
    for words in (
            f" SPACE or c: cut at once   l: lower to zero, then cut   t: plot (run, minute, arc)   b: bell {bell}"
            "   q: leave (what runs goes on)",
            f" SPACE/c: cut at once   l: lower to zero   t: plot   b: bell {bell}   q: leave, run goes on",
            f" SPACE/c: cut at once  l: lower to zero  t: plot  b: bell {bell}  q: leave"):
        if len(words) <= width:
            return Text(words, style=HEAD)
    return Text(" SPACE: cut  l: lower  q: leave", style=HEAD)
