"""Giving a terminal's rows to panes: each has a least and a most, and a table says who grows first.

What a pane needs least it always gets.  Where even that is too much, the panes that give way lose rows in the order
of `GIVES_WAY`; readings, state, hold clock, alerts, cautions and keys are not in it.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from enum import StrEnum


class Pane(StrEnum):
    """The panes, in the order in which they stand on the screen."""

    HEADER = "header"
    STATE = "state"
    ALERTS = "alerts"
    DIGITS = "digits"
    READING = "reading"
    BARS = "bars"
    PLOT = "plot"
    RUN = "run"  # with room beside it for the inputs, on a wide terminal
    INPUTS = "inputs"
    CAUTION = "caution"
    HEALTH = "health"
    EVENTS = "events"
    NEXT = "next"
    KEYS = "keys"


GIVES_WAY = (Pane.EVENTS, Pane.HEALTH, Pane.INPUTS, Pane.RUN)
WHOLE = frozenset((Pane.DIGITS, Pane.BARS))  # a part of these is worth nothing
ALL = 1000


@dataclass(frozen=True, slots=True, kw_only=True)
class Room:
    """The least and the most rows that a pane can use; ``first`` is the fewest with which it begins at all."""

    least: int = 0
    most: int = ALL
    first: int = 1


# (pane, up to so many rows), first come first served; while energised the future and the clock matter, afterwards what
# happened and what must be done before anyone goes in
LIVE_GROWTH: tuple[tuple[Pane, int], ...] = (
    (Pane.RUN, 2), (Pane.BARS, 2), (Pane.INPUTS, ALL), (Pane.DIGITS, 5), (Pane.RUN, 3), (Pane.PLOT, 4),
    (Pane.EVENTS, 2), (Pane.PLOT, 7), (Pane.DIGITS, 7), (Pane.RUN, ALL), (Pane.EVENTS, 5), (Pane.NEXT, 2),
    (Pane.PLOT, 14), (Pane.HEALTH, ALL), (Pane.DIGITS, 11), (Pane.EVENTS, 8), (Pane.PLOT, 22), (Pane.DIGITS, 14),
    (Pane.EVENTS, 12), (Pane.PLOT, ALL),
)
REST_GROWTH: tuple[tuple[Pane, int], ...] = (
    (Pane.INPUTS, ALL), (Pane.RUN, 2), (Pane.NEXT, 2), (Pane.PLOT, 4), (Pane.DIGITS, 5), (Pane.EVENTS, 3),
    (Pane.BARS, 2), (Pane.RUN, ALL), (Pane.PLOT, 7), (Pane.EVENTS, 5), (Pane.DIGITS, 7), (Pane.HEALTH, ALL),
    (Pane.PLOT, 16), (Pane.EVENTS, 12), (Pane.DIGITS, 11), (Pane.PLOT, 24), (Pane.DIGITS, 14), (Pane.PLOT, ALL),
)


def rows_for(height: int, rooms: Mapping[Pane, Room], growth: Sequence[tuple[Pane, int]]) -> dict[Pane, int]:
    """Return the rows of each pane; together they are ``height`` at most, what is over goes to the events.

    Panes that neither give way nor fit make the sum larger than ``height``: the caller clips at the bottom but for
    the keys.
    """
    rows = {pane: room.least for pane, room in rooms.items()}
    spare = height - sum(rows.values())
    for pane in GIVES_WAY:
        if spare < 0 and pane in rows:
            taken = min(rows[pane], -spare)
            rows[pane] -= taken
            spare += taken
    for pane, wanted in growth:
        if pane not in rows or spare <= 0:
            continue
        room = rooms[pane]
        more = min(wanted, room.most) - rows[pane]
        if more > spare and pane in WHOLE:
            continue
        more = min(more, spare)
        if more > 0 and rows[pane] + more >= min(room.first, room.most):
            rows[pane] += more
            spare -= more
    if Pane.EVENTS in rows:
        rows[Pane.EVENTS] += max(0, spare)
    return rows
