"""What a rule sees."""

from hvhost.guard.view import View
from hvhost.wire.vocabulary import McuState
from tests.guard.build import block


def test_a_view_knows_its_extremes_and_places() -> None:
    """Extremes, last index and ticks are those of the block."""
    view = View(block(100, [5, 9, -3], [7, 1, 2], v_word=44), McuState.ENERGISED, ())
    assert (view.v_low, view.v_high, view.i_low, view.i_high) == (-3, 9, 1, 7)
    assert (view.last_index, view.tick(2), view.v_word, view.energised) == (102, 1020, 44, True)
