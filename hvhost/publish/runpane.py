"""The run in words: hold clock, step, readings, arcs, its end, who runs what, and the open request."""

from collections.abc import Sequence

from rich.cells import cell_len
from rich.text import Text

from hvhost.publish import wording
from hvhost.publish.folding import cells, joined, wrapped
from hvhost.publish.snapshot import ArmView, HoldView, Permission, Phase, RunView, Snapshot
from hvhost.publish.wording import View, left, local_time, printable, span

LEAST_BAR = 6
BETWEEN = " · "


def run_lines(snapshot: Snapshot, view: View, width: int, rows: int) -> list[Text]:
    """Return at most ``rows`` lines on what runs or is asked for, the weightiest first.

    Verdict, hold clock, step with its times, run; with rows to spare each on a line of its own, with the folder.
    """
    if snapshot.arm is not None:
        return _bold(request_words(snapshot, snapshot.arm), width, rows)
    run = snapshot.run
    first = [f"verdict: {printable(snapshot.verdict_text)}"] if snapshot.verdict_text else []
    if run is None:
        return [*_bold(first, width, rows), Text("no run")][:rows]
    head = _bold(first, width, 2)
    if run.hold is not None and not run.ended:
        head.append(hold_clock(run.hold, snapshot, view, width))
    spare = rows - len(head)
    for texts in _ways(run, snapshot, view):
        lines = [line for parts in texts for line in _flowing(parts, width)]
        if len(lines) <= spare:
            return [*head, *map(Text, lines)]
    who = cells(printable(BETWEEN.join(_who_brief(run))), width)
    fewest = [*_flowing(_ways(run, snapshot, view)[-1][0], width), who]
    return [*head, *map(Text, fewest[: max(0, spare)])][:rows]


def _flowing(parts: Sequence[str], width: int) -> list[str]:
    there = [printable(part) for part in parts if part]
    return joined(there, BETWEEN, width, 3) if there else []


def _bold(texts: list[str], width: int, rows: int) -> list[Text]:
    lines = [line for text in texts for line in wrapped(text, width, 2)]
    if len(lines) > rows:
        lines = joined(texts, BETWEEN, width, rows) if rows and texts else []
    return [Text(line, style="bold") for line in lines]


def _ways(run: RunView, snapshot: Snapshot, view: View) -> tuple[tuple[Sequence[str], ...], ...]:
    """Return ways to say it, each lines of parts: from one line for everything to as few as they fit into."""
    step, timing, who = _step(run), _timing(run, snapshot, view), _who(run)
    if run.ended:
        return ((who[:1], who[1:], [*timing, step], [run.folder]), (who, [*timing, step]), ([*who, *timing],),
                ([*_who_brief(run)[:2], *timing],))
    return (([step], timing, who[:1], who[1:], [run.folder]), ([step], timing, who), ([step, *timing], who),
            ([_step_brief(run), *timing], who), ([_step_brief(run), *timing], _who_brief(run)))


def _step(run: RunView) -> str:
    return _step_brief(run) + (f": {run.step_text}" if run.step_total and run.step_text else "")


def _step_brief(run: RunView) -> str:
    return f"step {run.step_number}/{run.step_total} {run.step_name}".rstrip() if run.step_total else ""


def _who(run: RunView) -> list[str]:
    return [f"{'last run' if run.ended else 'run'} {run.run_id}: {run.plan or run.kind}",
            f"specimen {run.specimen or '--'}, operator {run.operator or '--'}"]


def _who_brief(run: RunView) -> list[str]:
    """The same for a narrow place: a long title may be clipped at its end, a specimen never is."""
    return [f"specimen {run.specimen or '--'}", f"{'last run' if run.ended else 'run'} {run.run_id}",
            run.plan or run.kind]


def request_words(snapshot: Snapshot, arm: ArmView) -> list[str]:
    """Return what is asked for: plan, specimen, highest voltage and duration, by whom."""
    highest = wording.volts_scale(snapshot).text(arm.volts_highest)
    lines = [f"REQUEST: {printable(arm.plan)}", f"specimen {printable(arm.specimen) or '--'}",
             f"highest {highest}  for {span(arm.duration_s)} at most", f"asked by {printable(arm.asked_by)}"]
    return [*lines, "stand-in: the press may be simulated"] if arm.simulated_press else lines


def hold_clock(hold: HoldView, snapshot: Snapshot, view: View, width: int) -> Text:
    """Return the hold clock as the plan defines it, with its bar where there is room; it never runs on its own.

    Between two snapshots it runs on only while the mean is inside the tolerance and the output is known.
    """
    unknown = wording.output_unknown(snapshot, view)
    counts = hold.inside and snapshot.phase is Phase.HOLD and not unknown
    since_s = 0.0 if unknown else view.since_s
    elapsed_s = min(hold.elapsed_s + (since_s if counts else 0.0), hold.required_s)
    how = f"HOLD {span(elapsed_s)} of {span(hold.required_s)} {_how(hold, snapshot, counts, unknown)}"
    anew = f", restarted {hold.restarts}x" if hold.restarts else ""
    words = next((words for words in (f"{how}{anew}{rest}" for rest in _at_most(hold, since_s))
                  if cell_len(words) <= width), how)
    room = width - cell_len(words) - 3
    if room >= LEAST_BAR and hold.required_s > 0.0:
        filled = max(0, min(room, int(elapsed_s / hold.required_s * room)))
        words += f" [{'█' * filled}{'·' * (room - filled)}]"
    return Text(words, style="bold")


def _at_most(hold: HoldView, since_s: float) -> tuple[str, ...]:
    """The step's own end, from the longest words to none."""
    if hold.at_most_s is None:
        return ("",)
    most = f"at most {span(hold.at_most_s)}"
    if hold.step_s is None:
        return (f", {most}", "")
    rest = span(hold.at_most_s - hold.step_s - since_s)
    return (f", {most} ({rest} left)", f", {rest} of {span(hold.at_most_s)} left", f", {most}", "")


def _how(hold: HoldView, snapshot: Snapshot, counts: bool, unknown: bool) -> str:
    """How the clock counts, or why it stands."""
    if unknown:
        return f"{hold.clock}, LAST KNOWN"
    if snapshot.permission is Permission.PAUSING:
        return f"{hold.clock}, clock stands: arc pause"
    if counts:
        return hold.clock
    around = "the tolerance"
    if hold.tolerance is not None and hold.volts is not None:
        around = f"±{hold.tolerance * 100:g} % of {wording.volts_scale(snapshot).text(hold.volts)}"
    if hold.inside:
        return f"{hold.clock}, clock stands"
    return f"OUT OF {around}: clock stands" if hold.begun else f"clock waits for {around}"


def _timing(run: RunView, snapshot: Snapshot, view: View) -> list[str]:
    parts = []
    if not run.ended and wording.output_unknown(snapshot, view):  # no clock is vouched for
        return [f"last known after {span(run.elapsed_s)}"]
    if run.next_reading_s is not None and not run.ended:
        parts.append(f"next reading in {left(run.next_reading_s - view.since_s)}")
    if run.arcs or run.arcs_allowed is not None:
        parts.append(f"arcs {run.arcs}" + (f" of {run.arcs_allowed} allowed" if run.arcs_allowed is not None else ""))
    if run.ended:
        parts.append(f"took {span(run.elapsed_s)}" if run.elapsed_s else "never energised")
    elif run.expected_s is not None:
        end_ns = snapshot.utc_ns + int(run.expected_s * 1e9)
        parts.append(f"{span(run.expected_s - view.since_s)} to go, ends {local_time(end_ns, view.zone, '%H:%M:%S')}")
    elif run.remaining_s is not None:
        parts.append(f"{span(run.remaining_s - view.since_s)} left at most")
    elif run.elapsed_s:
        parts.append(f"for {span(run.elapsed_s)}")
    return parts
