"""The screen as a pure function: snapshot, view and size in, exactly ``height`` lines of at most ``width`` cells out.

Rows are given out by need: alerts, state, readbacks and the caution before anything else; the trend takes what is
left and goes first.  Nothing is read or written here.
"""

from collections.abc import Sequence

from rich.cells import cell_len, set_cell_size
from rich.text import Text

from hvhost.publish import panes, wording
from hvhost.publish.panes import ALERT, wrapped
from hvhost.publish.snapshot import Snapshot
from hvhost.publish.wording import View

LEAST_WIDTH, LEAST_HEIGHT = 80, 24
FIXED_ROWS = 8  # header, state, reading, two bars, health, next acts, footer
MOST_ALERTS = 5


def screen(snapshot: Snapshot, view: View, width: int, height: int) -> list[Text]:
    """Return the picture of ``snapshot`` at this size."""
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
    if line.style in (panes.HEAD, ALERT):
        line = line.copy()
        line.append(" " * (width - line.cell_len))
    line.no_wrap = True
    return line


def _full(snapshot: Snapshot, view: View, width: int, height: int) -> list[Text]:
    alerts = _alert_lines(snapshot, view, width, MOST_ALERTS)
    cautions = wrapped(wording.caution(snapshot), width - 2, 4) if wording.caution(snapshot) else []
    spare = height - FIXED_ROWS - len(alerts) - len(cautions)
    digits = _digit_rows(width, height, spare)
    spare -= digits
    pair, event_rows, trend_rows = _share(spare, height)
    lines = [panes.header(snapshot, view, width), panes.state_line(snapshot, view), *alerts]
    lines += panes.readbacks(snapshot, view, width, digits)
    lines += [panes.reading_line(snapshot, view), *panes.bars(snapshot, view, width)]
    if trend_rows:
        lines += panes.trends(snapshot, width, trend_rows)
    lines += _pair(snapshot, view, width, pair)
    lines += [Text(f" {line}", style="bold") for line in cautions]
    lines.append(panes.health(snapshot))
    shown = panes.events(snapshot, view, event_rows)
    lines += shown + [Text("")] * (event_rows - len(shown))
    return [*lines, panes.next_line(snapshot, view), panes.footer(view, width)]


def _digit_rows(width: int, height: int, spare: int) -> int:
    """Return the rows of the large digits: five on a small terminal, more where width and height have them."""
    if spare < 10:
        return 3
    wanted = 5 if width < 116 or height < 30 else 7 if width < 180 or height < 44 else 14 if height >= 56 else 11
    return min(wanted + (wanted > 5), spare - 5)


def _share(spare: int, height: int) -> tuple[int, int, int]:
    """Return rows for run and inputs, for events, for the trend (none below three)."""
    pair = min(4 if height < 30 else 8, max(3, spare - 2))
    spare -= pair
    event_rows = min(3 if height < 30 else 6 if height < 44 else 10, max(0, spare))
    trend = spare - event_rows
    if trend < 3:
        return pair, event_rows + trend, 0
    return pair, event_rows, trend


def _alert_lines(snapshot: Snapshot, view: View, width: int, most: int) -> list[Text]:
    lines = [line for alert in wording.alerts(snapshot, view) for line in wrapped(alert, width - 4, 2, "## ")]
    return [Text(f" {line} ", style=ALERT) for line in lines[:most]]


def _pair(snapshot: Snapshot, view: View, width: int, rows: int) -> list[Text]:
    """Return run and inputs side by side."""
    left_width = width * 6 // 10
    left = panes.run_lines(snapshot, view, left_width - 2)[:rows]
    right = panes.inputs(snapshot, width - left_width - 1, rows)[:rows]
    lines = []
    for row in range(rows):
        line = Text(" ")
        run = left[row] if row < len(left) else Text("")
        line.append(_cells(run.plain, left_width - 2), run.style)
        line.append(" ")
        if row < len(right):
            line.append_text(right[row])
        lines.append(line)
    return lines


def _cells(text: str, width: int) -> str:
    """Return ``text`` in exactly ``width`` cells, with an ellipsis where it was longer."""
    return set_cell_size(text, width) if cell_len(text) <= width else set_cell_size(text, width - 1) + "…"


def _small(snapshot: Snapshot, view: View, width: int, height: int) -> list[Text]:
    """Return the weightiest words for a terminal below 80x24; the last row is the keys."""
    volts, amps = wording.volts_scale(snapshot), wording.amps_scale(snapshot)
    reading = snapshot.reading
    lines = _alert_lines(snapshot, view, width, max(1, height - 4))
    lines.append(panes.state_line(snapshot, view))
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
