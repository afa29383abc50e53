"""The pieces of the way to a set-point that is set by hand."""

from hypothesis import given
from hypothesis import strategies as st

from hvhost.supervisor.direct import PIECE_S, SetPoint, next_piece
from tests.supervisor.lab import DEMO

HZ = 10_000
SLEW = DEMO.settings()["vslew"]
WORD = st.integers(0, DEMO.voltage.program.code(24e3))


@given(start=WORD, volts=st.floats(0.0, 24e3), slew=st.floats(0.5, 5e3))
def test_every_way_arrives_and_no_piece_is_steeper_than_its_slew(start: int, volts: float, slew: float) -> None:
    """Each piece moves, none beyond the goal, none steeper than asked for or than the MCU allows."""
    goal = SetPoint(volts=volts, amps=1e-3, slew_v_per_s=slew)
    end, amps = DEMO.voltage.program.code(volts), DEMO.current.program.code(1e-3)
    words = (start, amps)
    per_code = DEMO.voltage.program.quantum
    for _ in range(5):
        piece = next_piece(goal, words, DEMO, HZ)
        if piece is None:
            assert words == (end, amps)
            return
        moved = abs(piece.v - words[0])
        assert moved >= 1
        assert abs(end - piece.v) < abs(end - words[0])
        assert moved * HZ <= SLEW * piece.ticks
        assert moved * per_code <= slew * (piece.ticks + 1) / HZ * 1.001 + per_code * 1e-6
        assert piece.ticks <= max(round(PIECE_S * HZ), round(per_code / slew * HZ) + 1)
        words = (piece.v, piece.i)


def test_the_current_limit_leads_upward() -> None:
    """First the limit, then the voltage."""
    piece = next_piece(SetPoint(volts=1e3, amps=1e-3, slew_v_per_s=1e3), (0, 0), DEMO, HZ)
    assert piece is not None
    assert (piece.v, piece.i > 0) == (0, True)


def test_at_the_goal_there_is_nothing_to_do() -> None:
    """No segment that changes nothing."""
    words = (DEMO.voltage.program.code(1e3), DEMO.current.program.code(1e-3))
    assert next_piece(SetPoint(volts=1e3, amps=1e-3, slew_v_per_s=1e3), words, DEMO, HZ) is None
