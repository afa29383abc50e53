"""The small values between the runner and the core."""

from hvhost.supervisor.driving import MOVES, PHASES
from hvhost.supervisor.notes import Doing, Measured, What


def test_a_block_ends_behind_its_last_pair() -> None:
    """Tick and index of what follows."""
    measured = Measured(index=100, tick=1000, ticks=320, pairs=32, volts=0.0, amps=0.0, volts_max=0.0)
    assert (measured.end_tick, measured.end_index) == (1320, 132)


def test_every_doing_with_words_out_has_a_move_and_every_step_note_a_phase() -> None:
    """Nothing that the runner does is without a name in permission and record."""
    assert set(MOVES) == {Doing.RAMPING, Doing.HOLDING, Doing.RETREATING, Doing.RESTING}
    assert set(PHASES) == {What.STEP_BEGUN, What.STEP_ENDED, What.CLOCK_STARTED, What.CLOCK_RESTARTED}
