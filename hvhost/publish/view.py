"""The screen as a pure function: snapshot, view and size in, exactly ``height`` lines of at most ``width`` cells out.

Rows are given out by need: alerts, state, readbacks and the caution before anything else; the trend takes what is
left and goes first.  Nothing is read or written here.
"""

from collections.abc import Sequence

from rich.text import Text

from hvhost.publish import panes, wording
from hvhost.publish.panes import ALERT, wrapped
from hvhost.publish.snapshot import Snapshot
from hvhost.publish.wording import View

LEAST_WIDTH, LEAST_HEIGHT = 80, 24
FIXED_ROWS = 8  # header, state, reading, two bars, health, next acts, footer
MOST_ALERTS = 5
MOST_CAUTIONS = 6  # at 80 columns the caution with its reasons takes four or five: it is never clipped
WIDE, TALL = 110, 32  # from here on run and inputs stand side by side, and digits grow


def screen(snapshot: Snapshot, view: View, width: int, height: int) -> list[Text]:
    """Return the picture of ``snapshot`` at this size."""
    snapshot = wording.as_last_known(snapshot, view)
    if width < LEAST_WIDTH or height < LEAST_HEIGHT:
        lines = _small(snapshot, view, width, height)
    else:
        lines = _full(snapshot, view, width, height)
    return fitted(lines, width, height)


def fitted(lines: Sequence[Text], width: int, height: int) -> list[Text]:
    """Return exactly ``height`` lines, none wider than ``width``; a clipped one ends in an ellipsis."""
    kept = [_clipped(line, width) for line in lines[:height]]
    return kept + [Text("")] * (height - len(kept))


def _clipped(line: Text, width: int) -> Text:
    if line.cell_len > width:
        line = line.copy()
        line.truncate(width, overflow="ellipsis")
    if line.style in (panes.HEAD, panes.STATE, ALERT):
        line = line.copy()
        line.append(" " * (width - line.cell_len))
    line.no_wrap = True
    return line


def _full(snapshot: Snapshot, view: View, width: int, height: int) -> list[Text]:
    alerts = _alert_lines(snapshot, view, width, MOST_ALERTS)
    words = wording.caution(snapshot)
    cautions = [Text(f" {line}", style="bold") for line in wrapped(words, width - 2, MOST_CAUTIONS)] if words else []
    spare = height - FIXED_ROWS - len(alerts) - len(cautions)
    readbacks = panes.readbacks(snapshot, view, width, _digit_rows(width, height, spare))
    digits = len(readbacks)
    if width >= WIDE and height >= TALL:
        middle = _side_by_side(snapshot, view, width, min(8, spare - digits - 2))
    else:
        middle = _stacked(snapshot, view, width, spare - digits - 1)
    spare -= digits + len(middle)
    event_rows, trend_rows = _share(spare, height) if snapshot.trend else (max(0, spare), 0)
    lines = [panes.header(snapshot, view, width), panes.state_line(snapshot, view, width), *alerts]
    lines += [*readbacks, panes.reading_line(snapshot, view), *panes.bars(snapshot, view, width)]
    lines += panes.trends(snapshot, width, trend_rows) if trend_rows else []
    lines += [*middle, *cautions, panes.health(snapshot)]
    shown = panes.events(snapshot, view, event_rows)
    lines += shown + [Text("")] * (event_rows - len(shown))
    return [*lines, panes.next_line(snapshot, view), panes.footer(view, width)]


def _digit_rows(width: int, height: int, spare: int) -> int:
    """Return the rows of the large digits: five on a small terminal, more where width and height have them."""
    if spare < 10:
        return 3
    wanted = 5 if width < WIDE or height < TALL else 8 if width < 180 or height < 50 else 14
    return min(wanted, spare - 5)


def _share(spare: int, height: int) -> tuple[int, int]:
    """Return rows for events and for the trend (none below three)."""
    event_rows = min(2 if height < TALL else 6 if height < 50 else 12, max(0, spare))
    trend = spare - event_rows
    return (event_rows, trend) if trend >= 3 else (event_rows + trend, 0)


def _alert_lines(snapshot: Snapshot, view: View, width: int, most: int) -> list[Text]:
    """Return the alerts in reverse; red where something is or may be dangerous, plain where someone is asked to act."""
    lines = []
    for alert in wording.alerts(snapshot, view):
        style = panes.STATE if alert.startswith("REQUESTED") else ALERT
        lines += [Text(f" {line} ", style=style) for line in wrapped(alert, width - 4, 2, "## ")]
    return lines[:most]


def _stacked(snapshot: Snapshot, view: View, width: int, most: int) -> list[Text]:
    """Return the run above the inputs, each over the whole width, in at most ``most`` rows."""
    run = panes.run_lines(snapshot, view, width - 2, 3)[:3]
    inputs = panes.inputs(snapshot, width - 2, max(1, min(6 - len(run), most - len(run))))
    return [Text.assemble(" ", line) for line in [*run, *inputs][: max(1, most)]]


def _side_by_side(snapshot: Snapshot, view: View, width: int, rows: int) -> list[Text]:
    """Return the run at the left, the inputs at the right."""
    left_width = width * 6 // 10
    left = panes.run_lines(snapshot, view, left_width - 2, rows)[:rows]
    right = panes.inputs(snapshot, width - left_width - 1, rows)[:rows]
    lines = []
    for row in range(max(len(left), len(right))):
        line = Text(" ")
        run = left[row] if row < len(left) else Text("")
        line.append(panes.cells(run.plain, left_width - 2), run.style)
        line.append(" ")
        if row < len(right):
            line.append_text(right[row])
        lines.append(line)
    return lines


def _small(snapshot: Snapshot, view: View, width: int, height: int) -> list[Text]:
    """Return the weightiest words for a terminal below 80x24; the last row is the keys."""
    volts, amps = wording.volts_scale(snapshot), wording.amps_scale(snapshot)
    reading = snapshot.reading
    lines = _alert_lines(snapshot, view, width, max(1, height - 4))
    lines.append(panes.state_line(snapshot, view, width))
    if reading is not None and not wording.output_unknown(snapshot, view):
        old = "OLD " if wording.reading_old(snapshot, view) else ""
        lines.append(Text(f" {old}{volts.text(reading.volts)}  {amps.text(reading.amps)}", style="bold"))
    lines.append(panes.next_line(snapshot, view))
    lines += [Text(f" {line}") for line in wrapped(wording.caution(snapshot), width - 2, 6)]
    lines.append(Text(f" (at least {LEAST_WIDTH}x{LEAST_HEIGHT} shows the whole picture)"))
    lines = lines[: max(0, height - 1)]
    keys = Text(" SPACE: cut  l: lower  q: leave" if view.can_stop and view.connected else " CANNOT STOP: use the "
                "emergency switching off", style=panes.HEAD)
    return [*lines, *[Text("")] * (height - 1 - len(lines)), keys]
