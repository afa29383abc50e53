"""The plots of the screen: volts and amps over the run or its last minute with the future ahead, and the last arc.

Two plots stand side by side, volts at the left.  The voltage's goes beyond the present: what the plan has still to
come is dotted behind a line of marks.  With so many rows that both are read, the last arc or trip stands below.
"""

from collections.abc import Sequence

from rich.text import Text

from hvhost.publish import wording
from hvhost.publish.plot import Plot, nice_top
from hvhost.publish.snapshot import Permission, Snapshot, TrendBucket
from hvhost.publish.wording import Plotted, Scale, View, fine, known, minutes

LABEL = 11  # columns of the axis at the left
LEAST_ROWS = 3
AXIS_ROWS = 5  # from here on the last row tells the times
BOTH_ROWS = 12  # from here on trend and arc stand one above the other
MINUTE_S, AHEAD_S = 60.0, 30.0
AT_REST = frozenset((Permission.IDLE, Permission.REQUESTED, Permission.PROVING))

Span = tuple[float, float, float]


def choices(snapshot: Snapshot) -> tuple[Plotted, ...]:
    """Return what there is to plot."""
    over_time = (Plotted.RUN, Plotted.MINUTE) if snapshot.trend or snapshot.course else ()
    return (*over_time, Plotted.EVIDENCE) if snapshot.evidence is not None else over_time


def shown(snapshot: Snapshot, view: View) -> Plotted | None:
    """Return what is plotted: what a key chose, else the last arc or trip once nothing is energised, else the run."""
    there = choices(snapshot)
    if view.plotted in there:
        return view.plotted
    if Plotted.EVIDENCE in there and snapshot.permission in AT_REST:
        return Plotted.EVIDENCE
    return there[0] if there else None


def after(snapshot: Snapshot, view: View) -> Plotted:
    """Return what the key of the plot leads to."""
    there, now = choices(snapshot), shown(snapshot, view)
    return there[(there.index(now) + 1) % len(there)] if now is not None else view.plotted


def plots(snapshot: Snapshot, view: View, width: int, rows: int) -> list[Text]:
    """Return ``rows`` lines of plots, none where there is nothing to plot or fewer than three rows."""
    what = shown(snapshot, view)
    if what is None or rows < LEAST_ROWS:
        return []
    if rows >= BOTH_ROWS and len(choices(snapshot)) == len(Plotted) - 1:
        below = rows * 4 // 9
        over_time = Plotted.RUN if what is Plotted.EVIDENCE else what
        return [*_pair(snapshot, view, width, rows - below, over_time),
                *_pair(snapshot, view, width, below, Plotted.EVIDENCE)]
    return _pair(snapshot, view, width, rows, what)


def _pair(snapshot: Snapshot, view: View, width: int, rows: int, what: Plotted) -> list[Text]:
    half = width // 2
    volts, amps = wording.volts_scale(snapshot), wording.amps_scale(snapshot)
    if what is Plotted.EVIDENCE:
        left, right = _evidence(snapshot, volts, half - 1, rows), _evidence(snapshot, amps, width - half - 1, rows)
    else:
        if not snapshot.trend:  # nothing was measured yet: the plan alone, over the whole width
            return [Text(line) for line in _over_time(snapshot, view, what, volts, width - 1, rows)]
        left = _over_time(snapshot, view, what, volts, half - 1, rows)
        right = _over_time(snapshot, view, what, amps, width - half - 1, rows)
    return [Text(f"{first:<{half}}{second}") for first, second in zip(left, right, strict=True)]


def _spans(buckets: Sequence[TrendBucket], scale: Scale) -> list[Span]:
    if scale.unit.endswith("V"):
        return [(one.t_s, one.v_min, one.v_max) for one in buckets]
    return [(one.t_s, one.i_min, one.i_max) for one in buckets]


def _present(snapshot: Snapshot, view: View, scale: Scale) -> list[Span]:
    """The last reading: buckets come once a second only."""
    reading = snapshot.reading
    if reading is None or wording.output_unknown(snapshot, view):
        return []
    volts = scale.unit.endswith("V")
    low, high = map(known, (reading.volts_min, reading.volts_max) if volts else (reading.amps_min, reading.amps_max))
    return [] if low is None or high is None else [(snapshot.now_s - reading.age_s, low, high)]


def _over_time(snapshot: Snapshot, view: View, what: Plotted, scale: Scale, width: int, rows: int) -> list[str]:
    now_s, course = snapshot.now_s, snapshot.course if scale.unit.endswith("V") else ()
    minute = what is Plotted.MINUTE
    spans = _spans((snapshot.recent or snapshot.trend) if minute else snapshot.trend, scale)
    last_s = spans[-1][0] if spans else now_s
    spans += [one for one in _present(snapshot, view, scale) if one[0] > last_s]
    begin_s = now_s - MINUTE_S if minute else min(spans[0][0] if spans else now_s, now_s)
    ahead_s = max(0.0, course[-1].t_s - now_s) if course else 0.0
    if minute:
        spans = [one for one in spans if one[0] >= begin_s]
        ahead_s = min(ahead_s, AHEAD_S)
    past_s = now_s - begin_s
    end_s = max(now_s + ahead_s, begin_s + 1e-3)
    coming = [(point.t_s, point.volts) for point in course]
    top = nice_top(max([high for _, _, high in spans] + [v for t_s, v in coming if t_s <= end_s + AHEAD_S],
                       default=0.0))
    if past_s < 1.0:
        name = brief = "planned"
    else:
        name = "last 1:00" if minute else "whole run"
        brief = "last 1:00" if minute else f"run {minutes(past_s)}"
    drawing = _room(width, rows, begin_s, end_s, top)
    drawing.spans(spans)
    drawing.dotted(coming)
    marks = [(begin_s, f"-{minutes(past_s)}")]
    if ahead_s > 0.0:
        drawing.mark(now_s)
        marks += [(now_s, "now"), (end_s, f"+{minutes(ahead_s)}")]
    else:
        marks += [(end_s, "now")]
    return _framed(drawing, scale, top, rows, name, [brief, f"+{minutes(ahead_s)}" if ahead_s > 0.0 else ""], marks)


def _evidence(snapshot: Snapshot, scale: Scale, width: int, rows: int) -> list[str]:
    evidence = snapshot.evidence
    assert evidence is not None
    spans = _spans(evidence.points, scale)
    begin_s, end_s = (spans[0][0], spans[-1][0]) if spans else (0.0, 0.0)
    top = nice_top(max((high for _, _, high in spans), default=0.0))
    drawing = _room(width, rows, begin_s, end_s, top)
    drawing.spans(spans)
    drawing.mark(0.0)
    name = f"last {evidence.kind}"
    words = wording.printable(evidence.text) or evidence.kind
    marks = [(begin_s, f"-{minutes(begin_s)}"), (0.0, words), (end_s, f"+{minutes(end_s)}")]
    return _framed(drawing, scale, top, rows, name, [name, minutes(end_s - begin_s)], marks)


def _room(width: int, rows: int, begin_s: float, end_s: float, top: float) -> Plot:
    return Plot(max(1, width - LABEL), rows - 1 if rows >= AXIS_ROWS else rows, begin_s, end_s, top)


def _framed(drawing: Plot, scale: Scale, top: float, rows: int, name: str, brief: list[str],
            marks: list[tuple[float, str]]) -> list[str]:
    """Put the axis at the left; the times below where there is a row for them, else beside."""
    lines = drawing.lines()
    labels = [""] * len(lines)
    labels[0], labels[-1] = _axis(top * scale.polarity, scale.unit[-1]), "0"
    if rows < AXIS_ROWS:
        for row, words in zip(range(1, len(lines) - 1), brief, strict=False):
            labels[row] = words
    else:
        labels.append(name)
        lines.append(_times(drawing, marks, len(lines[0])))
    return [f"{label[: LABEL - 1]:>{LABEL - 1}} {line}" for label, line in zip(labels, lines, strict=True)]


def _times(drawing: Plot, marks: list[tuple[float, str]], width: int) -> str:
    """Write each time's words under its place; the first and the last stand flush, what would overlap is left out."""
    line = " " * width
    for t_s, words in [*marks[:1], *marks[-1:], *marks[1:-1]]:
        column = drawing.column(t_s)
        if column is None:
            continue
        begin = max(0, min(width - len(words), column // 2 - len(words) // 2))
        around = line[max(0, begin - 1): begin + len(words) + 1]
        if len(words) <= width and not around.strip():
            line = line[:begin] + words + line[begin + len(words):]
    return line


def _axis(value: float, unit: str) -> str:
    number, prefixed = fine(value, unit).split(" ")
    return f"{number.rstrip('0').rstrip('.') if '.' in number else number} {prefixed}"
