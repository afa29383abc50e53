"""The page for the display beside the arm input: what is asked for, large, while a request is open.

It stands outside the danger zone with sight of it, so it names what the press will permit: plan, specimen, highest
voltage, duration, who asked, and how long the request still stands.  Otherwise it shows state, readings and
cautions.  It cannot arm: the press is an input of the MCU and no key of anyone.
"""

from dataclasses import replace

from rich.text import Text

from hvhost.bench import cautions
from hvhost.publish import panes, wording
from hvhost.publish.digits import best_size, big_lines
from hvhost.publish.folding import cells, wrapped
from hvhost.publish.letters import large_words
from hvhost.publish.runpane import run_lines
from hvhost.publish.snapshot import ArmView, InputJudgement, Snapshot
from hvhost.publish.view import alert_lines, caution_lines, fitted
from hvhost.publish.wording import View, left, printable, span

CANNOT_ARM = "this display cannot arm"
PRESS = ("Only with the danger zone in sight and nobody in it: press the arm input, hold it 0.2 s to 3 s, let go. "
         "If anything differs from what you expect, do not press.")
MOST_ALERTS = 4
STATE_ROWS = 4  # of a state's large letters on a small terminal


def bench_display(snapshot: Snapshot, view: View, width: int, height: int) -> list[Text]:
    """Return the page at this size: exactly ``height`` lines of at most ``width`` cells."""
    snapshot = wording.as_last_known(snapshot, view)
    head = [panes.header(snapshot, view, width)]
    if snapshot.arm is not None and not wording.output_unknown(snapshot, view):
        body = _request(snapshot, snapshot.arm, view, width, height - 2)
    else:
        body = _state(snapshot, view, width, height - 2)
    room = max(0, height - 2)
    lines = [*head, *body[:room], *[Text("")] * (room - len(body))]
    return fitted([*lines[: max(0, height - 1)], _footer(view, width)], width, height, ascii_only=view.ascii_only)


def _request(snapshot: Snapshot, arm: ArmView, view: View, width: int, rows: int) -> list[Text]:
    """Banner, time left and voltage in large digits, specimen in large letters, the rest in words."""
    banner = "REQUEST TO ENERGISE" if arm.press_needed else f"REQUEST TO ENERGISE ({cautions.NO_ARM_INPUT})"
    lines = [Text(f" {line}", style=panes.STATE) for line in wrapped(banner, width - 1, 2)]
    lines += alert_lines(_without_request(snapshot), view, width, MOST_ALERTS)
    words = [f"plan {printable(arm.plan)}",
             f"for {span(arm.duration_s)} at most · asked by {printable(arm.asked_by)}"]
    if arm.typed_name:
        words.append(f"whoever asked must type '{printable(arm.typed_name)}'")
    if arm.simulated_press:
        words.append("REHEARSAL: a stand-in, no bench; the press may be simulated")
    rest = [line for text in words for line in wrapped(text, width - 2, 2)]
    rest += panes_lines(snapshot, width)
    rest += wrapped(PRESS, width - 2, 4) if arm.press_needed else []
    spare = rows - len(lines) - len(rest) - 2  # two labels
    digit_rows = max(1, min(14, spare * 3 // 5))
    lines += _figures(snapshot, arm, view, width, digit_rows)
    specimen = printable(arm.specimen) or "--"
    large = large_words(specimen, width - 2, max(0, spare - digit_rows))
    lines.append(Text(f" specimen {specimen}", style="bold"))
    lines += [Text(f" {line}", style="bold") for line in large]
    return [*lines, *(Text(f" {line}", style="bold") for line in rest)]


def _figures(snapshot: Snapshot, arm: ArmView, view: View, width: int, rows: int) -> list[Text]:
    """The highest voltage and the seconds left, side by side, each with its label above."""
    scale = wording.volts_scale(snapshot)
    half = width // 2
    figures = (("highest voltage", scale.number(arm.volts_highest), scale.unit),
               ("press within" if arm.press_needed else "stands for", left(arm.expires_s - view.since_s)[:-2], "s"))
    same = min(len(_large(number, unit, half - 3, rows)) for _, number, unit in figures)
    drawn = [[label, *_large(number, unit, half - 3, same)] for label, number, unit in figures]
    taken = max(map(len, drawn))
    drawn = [lines + [""] * (taken - len(lines)) for lines in drawn]
    return [Text(f" {cells(first, half - 2)} {second}", style="bold") for first, second in zip(*drawn, strict=True)]


def _large(number: str, unit: str, width: int, rows: int) -> list[str]:
    size = best_size(number, width - len(unit) - 1, rows)
    if size is None:
        return [f"{number} {unit}"]
    lines = big_lines(number, size)
    return [*lines[:-1], f"{lines[-1]} {unit}"]


def panes_lines(snapshot: Snapshot, width: int) -> list[str]:
    """What is not as arming needs it, in words."""
    named = [f"{printable(one.name)} {printable(one.state)}" for one in snapshot.inputs
             if one.judgement is not InputJudgement.OK]
    return wrapped(", ".join(named), width - 2, 2, "!! hinders arming: ") if named else []


def _state(snapshot: Snapshot, view: View, width: int, rows: int) -> list[Text]:
    """State in large letters, alerts, readings, hold clock, cautions."""
    words = wording.state_words(snapshot, view)
    alerts = alert_lines(snapshot, view, width, MOST_ALERTS)
    caution = caution_lines(snapshot, width)
    run = [Text.assemble(" ", line) for line in run_lines(snapshot, view, width - 2, 4)]
    spare = rows - len(alerts) - len(caution) - len(run) - 2
    big = max(STATE_ROWS, min(11, spare // 2))
    large = large_words(words, width - 2, big) or large_words(words.rpartition(": ")[2], width - 2, big)
    lines = [*alerts, *(Text(f" {line}", style="bold") for line in large)]
    lines += panes.state_lines(snapshot, view, width, 2)
    lines += panes.readbacks(snapshot, view, width, max(3, spare - len(large)))
    lines.append(panes.reading_line(snapshot, view))
    standing = [*run, *caution, *(Text(f" {line}", style="bold") for line in panes_lines(snapshot, width))]
    return [*lines[: max(0, rows - len(standing))], *standing]


def _without_request(snapshot: Snapshot) -> Snapshot:
    return replace(snapshot, arm=None)


def _footer(view: View, width: int) -> Text:
    words = f" {CANNOT_ARM.upper()}"
    keys = "   SPACE or c: cut at once   l: lower to zero   q: leave"
    if not view.can_stop or not view.connected:
        keys = " NOR STOP: use the emergency switching off"
    return Text(words + keys if len(words + keys) <= width else words, style=panes.HEAD)
