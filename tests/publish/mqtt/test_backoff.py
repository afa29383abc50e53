"""Pauses between attempts: they double, stay bounded, and are spread."""

from hypothesis import given
from hypothesis import strategies as st

from hvhost.publish.mqtt.backoff import FIRST_S, LONGEST_S, STEADY_S, TAKEN_OVER_S, Backoff


def test_pauses_double_up_to_a_bound_and_begin_anew_after_a_steady_connection() -> None:
    """Failures in a row wait longer; a connection that stood ends the row."""
    backoff = Backoff()
    pauses = [backoff.pause_s(1.0) for _ in range(8)]
    assert pauses == [0.5, 1.0, 2.0, 4.0, 8.0, 15.0, 15.0, 15.0]
    backoff.stood(STEADY_S - 0.1)
    assert backoff.pause_s(1.0) == LONGEST_S
    assert backoff.short == 1
    backoff.stood(STEADY_S)
    assert (backoff.pause_s(1.0), backoff.short) == (FIRST_S, 0)


@given(st.integers(1, 2000), st.floats(0.0, 1.0, exclude_max=True), st.booleans())
def test_every_pause_is_spread_and_bounded(failures: int, chance: float, taken_over: bool) -> None:
    """A pause is half to all of its bound, however many failures there were; a rival is given a minute."""
    backoff = Backoff()
    backoff.failures = failures - 1
    pause_s = backoff.pause_s(chance, taken_over)
    bound_s = TAKEN_OVER_S if taken_over else LONGEST_S
    assert FIRST_S / 2 <= pause_s <= bound_s
    if taken_over or failures > 5:
        assert pause_s >= bound_s / 2
