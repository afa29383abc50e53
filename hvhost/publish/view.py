"""The screen as a pure function: snapshot, view and size in, exactly ``height`` lines of at most ``width`` cells out.

:mod:`layout` gives out the rows by need.  Header and state stand first, next acts and keys last, whatever the state.
From ``WIDE`` x ``TALL`` on, run and inputs stand side by side.  Nothing is read or written here.
"""

from collections.abc import Sequence

from rich.text import Text

from hvhost.publish import panes, wording
from hvhost.publish.folding import cells, wrapped
from hvhost.publish.layout import LIVE_GROWTH, REST_GROWTH, Pane, Room, rows_for
from hvhost.publish.panes import ALERT
from hvhost.publish.plots import LEAST_ROWS, choices, plots
from hvhost.publish.runpane import run_lines
from hvhost.publish.snapshot import InputJudgement, Permission, Snapshot
from hvhost.publish.wording import ENERGISED, View

LEAST_WIDTH, LEAST_HEIGHT = 80, 24
MOST_ALERTS = 6
MOST_CAUTIONS = 6  # at 80 columns the caution with its reasons takes four or five: it is never clipped
WIDE, TALL = 110, 32  # from here on run and inputs stand side by side
DIGIT_ROWS = (14, 11, 7, 5, 3)
LIVE = ENERGISED | {Permission.WARNING}
# what a terminal without Unicode draws instead; braille is put in below
ASCII = {ord(one): other for one, other in zip("█▀▄▒·…µΩ┊°–—’“”", "#\"_%.~uO|o--'\"\"", strict=True)}
ASCII |= dict.fromkeys(range(10240, 10496), "*")


def screen(snapshot: Snapshot, view: View, width: int, height: int) -> list[Text]:
    """Return the picture of ``snapshot`` at this size."""
    snapshot = wording.as_last_known(snapshot, view)
    if width < LEAST_WIDTH or height < LEAST_HEIGHT:
        lines = _small(snapshot, view, width, height)
    else:
        lines = _full(snapshot, view, width, height)
    return fitted(lines, width, height, ascii_only=view.ascii_only)


def fitted(lines: Sequence[Text], width: int, height: int, *, ascii_only: bool = False) -> list[Text]:
    """Return exactly ``height`` lines, none wider than ``width``; a clipped one ends in an ellipsis."""
    kept = [_clipped(in_ascii(line) if ascii_only else line, width) for line in lines[:height]]
    if ascii_only:
        kept = [in_ascii(line) for line in kept]  # the ellipsis
    return kept + [Text("")] * (height - len(kept))


def in_ascii(line: Text) -> Text:
    """Return the line with signs that every terminal has; only lines without spans may grow by it."""
    line = line.copy()
    line.plain = "".join(one if ord(one) < 0x7F else "?" for one in line.plain.replace("±", "+-").translate(ASCII))
    return line


def _clipped(line: Text, width: int) -> Text:
    line = line.copy()
    if line.cell_len > width:
        line.truncate(width, overflow="ellipsis")
    if line.style in (panes.HEAD, panes.STATE, ALERT):
        line.append(" " * (width - line.cell_len))
    line.no_wrap = True
    return line


def _full(snapshot: Snapshot, view: View, width: int, height: int) -> list[Text]:
    wide = width >= WIDE and height >= TALL
    fixed = {
        Pane.HEADER: [panes.header(snapshot, view, width)],
        Pane.STATE: panes.state_lines(snapshot, view, width, 2),
        Pane.ALERTS: alert_lines(snapshot, view, width, MOST_ALERTS),
        Pane.READING: [panes.reading_line(snapshot, view)],
        Pane.CAUTION: caution_lines(snapshot, width),
        Pane.KEYS: [panes.footer(view, width)],
    }
    rooms = {pane: Room(least=len(lines), most=len(lines)) for pane, lines in fixed.items()}
    rooms |= _rooms(snapshot, view, width, wide)
    rows = rows_for(height, rooms, LIVE_GROWTH if snapshot.permission in LIVE else REST_GROWTH)
    drawn = dict(fixed)
    for pane in rooms:
        if pane not in fixed and pane is not Pane.EVENTS:
            drawn[pane] = _drawn(pane, snapshot, view, width, rows[pane], wide)
    event_rows = max(rows[Pane.EVENTS], height - sum(map(len, drawn.values())))  # what a pane could not use, too
    events = panes.events(snapshot, view, width, event_rows)
    drawn[Pane.EVENTS] = events + [Text("")] * (event_rows - len(events))
    lines = [line for pane in Pane if pane is not Pane.KEYS for line in drawn.get(pane, ())]
    return [*lines[: height - 1], *[Text("")] * (height - 1 - len(lines)), *fixed[Pane.KEYS]]


def _rooms(snapshot: Snapshot, view: View, width: int, wide: bool) -> dict[Pane, Room]:
    """Return what the panes that grow need at this width."""
    inputs_width = width - _left_width(width) - 1 if wide else width - 2
    run = len(run_lines(snapshot, view, (_left_width(width) if wide else width) - 2, 12))
    inputs = len(panes.inputs(snapshot, inputs_width, len(snapshot.inputs) + 4 if wide else 5, listed=wide))
    hindering = sum(one.judgement is not InputJudgement.OK for one in snapshot.inputs)
    health = len(panes.health(snapshot, width, 3))
    digits = len(panes.readbacks(snapshot, view, width, max(DIGIT_ROWS)))
    rooms = {
        Pane.DIGITS: Room(least=min(3, digits), most=digits),
        Pane.BARS: Room(most=2, first=2),
        Pane.PLOT: Room(most=100 if choices(snapshot) else 0, first=LEAST_ROWS),
        Pane.HEALTH: Room(least=health if snapshot.stopped_by else 1, most=health),
        Pane.EVENTS: Room(least=1, most=max(1, len(panes.events(snapshot, view, width, 50)))),
        Pane.NEXT: Room(least=1, most=len(panes.next_lines(snapshot, view, width, 3))),
    }
    if wide:
        return rooms | {Pane.RUN: Room(least=min(3, run), most=max(run, inputs))}
    return rooms | {Pane.RUN: Room(least=1, most=run),
                    Pane.INPUTS: Room(least=min(inputs, 1 + (0 < hindering < len(snapshot.inputs))), most=inputs)}


def _drawn(pane: Pane, snapshot: Snapshot, view: View, width: int, rows: int, wide: bool) -> list[Text]:
    """Return a pane's lines, at most ``rows``."""
    if rows <= 0:
        return []
    match pane:
        case Pane.DIGITS:
            return panes.readbacks(snapshot, view, width, rows)
        case Pane.BARS:
            return panes.bars(snapshot, view, width)
        case Pane.PLOT:
            return plots(snapshot, view, width, rows)
        case Pane.RUN if wide:
            return _side_by_side(snapshot, view, width, rows)
        case Pane.RUN:
            return [Text.assemble(" ", line) for line in run_lines(snapshot, view, width - 2, rows)]
        case Pane.INPUTS:
            return [Text.assemble(" ", line) for line in panes.inputs(snapshot, width - 2, rows, listed=False)]
        case Pane.HEALTH:
            return panes.health(snapshot, width, rows)
        case _:
            return panes.next_lines(snapshot, view, width, rows)


def alert_lines(snapshot: Snapshot, view: View, width: int, most: int) -> list[Text]:
    """Return the alerts in reverse; red where something is or may be dangerous, plain where someone is asked to act."""
    lines = []
    for alert in wording.alerts(snapshot, view):
        style = panes.STATE if alert.startswith("REQUESTED") else ALERT
        lines += [Text(f" {line} ", style=style) for line in wrapped(alert, width - 4, 2, "## ")]
    return lines[:most]


def caution_lines(snapshot: Snapshot, width: int) -> list[Text]:
    """Return the caution, whole; nothing while something is energised or about to be."""
    words = wording.caution(snapshot)
    return [Text(f" {line}", style="bold") for line in wrapped(words, width - 2, MOST_CAUTIONS)] if words else []


def _left_width(width: int) -> int:
    return width * 6 // 10


def _side_by_side(snapshot: Snapshot, view: View, width: int, rows: int) -> list[Text]:
    """Return the run at the left, the inputs at the right."""
    left_width = _left_width(width)
    left = run_lines(snapshot, view, left_width - 2, rows)[:rows]
    right = panes.inputs(snapshot, width - left_width - 1, rows)[:rows]
    lines = []
    for row in range(max(len(left), len(right))):
        line = Text(" ")
        run = left[row] if row < len(left) else Text("")
        line.append(cells(run.plain, left_width - 2), run.style)
        line.append(" ")
        if row < len(right):
            line.append_text(right[row])
        lines.append(line)
    return lines


def _small(snapshot: Snapshot, view: View, width: int, height: int) -> list[Text]:
    """Return the weightiest words for a terminal below 80x24; the last row is the keys."""
    volts, amps = wording.volts_scale(snapshot), wording.amps_scale(snapshot)
    reading = snapshot.reading
    lines = alert_lines(snapshot, view, width, max(1, height - 4))
    lines += panes.state_lines(snapshot, view, width, 1)
    if reading is not None and not wording.output_unknown(snapshot, view):
        old = "OLD " if wording.reading_old(snapshot, view) else ""
        lines.append(Text(f" {old}{volts.text(reading.volts)}  {amps.text(reading.amps)}", style="bold"))
    if snapshot.run is not None and snapshot.run.hold is not None and not snapshot.run.ended:
        lines += [Text.assemble(" ", line) for line in run_lines(snapshot, view, width - 2, 1)]
    lines += panes.next_lines(snapshot, view, width, 1)
    lines += [Text(f" {line}") for line in wrapped(wording.caution(snapshot), width - 2, 6)]
    lines.append(Text(f" (at least {LEAST_WIDTH}x{LEAST_HEIGHT} shows the whole picture)"))
    lines = lines[: max(0, height - 1)]
    keys = Text(" SPACE: cut  l: lower  q: leave" if view.can_stop and view.connected else " CANNOT STOP: use the "
                "emergency switching off", style=panes.HEAD)
    return [*lines, *[Text("")] * (height - 1 - len(lines)), keys]
