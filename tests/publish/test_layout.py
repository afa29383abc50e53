"""Rows for panes."""

from hypothesis import given
from hypothesis import strategies as st

from hvhost.publish.layout import GIVES_WAY, LIVE_GROWTH, REST_GROWTH, Pane, Room, rows_for

ROOMS = st.builds(lambda least, more, first: Room(least=least, most=least + more, first=first),
                  st.integers(0, 6), st.integers(0, 30), st.integers(1, 4))


@given(st.dictionaries(st.sampled_from(Pane), ROOMS), st.integers(0, 100), st.sampled_from([LIVE_GROWTH, REST_GROWTH]))
def test_no_more_rows_than_there_are_unless_what_must_stand_is_more(rooms: dict[Pane, Room], height: int,
                                                                    growth: tuple[tuple[Pane, int], ...]) -> None:
    """Every pane but those that give way has its least; the sum is the height at most, where that is possible."""
    rows = rows_for(height, rooms, growth)
    must = sum(room.least for pane, room in rooms.items() if pane not in GIVES_WAY)
    assert sum(rows.values()) <= max(height, must)
    assert all(rows[pane] >= room.least for pane, room in rooms.items() if pane not in GIVES_WAY)
    assert all(rows[pane] <= room.most for pane, room in rooms.items() if pane is not Pane.EVENTS)


def test_what_is_worth_nothing_in_part_is_given_whole_or_not() -> None:
    """Large digits of four rows do not exist; a plot begins with three."""
    rooms = {Pane.DIGITS: Room(least=3, most=5), Pane.PLOT: Room(first=3), Pane.EVENTS: Room(most=0)}
    assert rows_for(4, rooms, LIVE_GROWTH)[Pane.DIGITS] == 3
    assert rows_for(5, rooms, LIVE_GROWTH)[Pane.DIGITS] == 5
    assert rows_for(7, rooms, LIVE_GROWTH)[Pane.PLOT] == 0
    assert rows_for(8, rooms, LIVE_GROWTH)[Pane.PLOT] == 3


def test_events_go_first_and_take_what_is_over() -> None:
    """Where rows are missing the events lose them; where rows are over the events have them."""
    rooms = {Pane.EVENTS: Room(least=2, most=2), Pane.INPUTS: Room(least=2, most=2), Pane.ALERTS: Room(least=4, most=4)}
    assert rows_for(7, rooms, REST_GROWTH) == {Pane.EVENTS: 1, Pane.INPUTS: 2, Pane.ALERTS: 4}
    assert rows_for(5, rooms, REST_GROWTH) == {Pane.EVENTS: 0, Pane.INPUTS: 1, Pane.ALERTS: 4}
    assert rows_for(20, rooms, REST_GROWTH)[Pane.EVENTS] == 14


def test_readings_state_clock_alerts_cautions_and_keys_never_give_way() -> None:
    """The panes that an engineer must always see are in neither list of those that lose rows."""
    assert not {Pane.STATE, Pane.ALERTS, Pane.DIGITS, Pane.READING, Pane.CAUTION, Pane.KEYS} & set(GIVES_WAY)
