"""B4, B5 and B6 under load in a tiny form."""

import pytest

from hvhost.speed import lasting
from hvhost.speed.lasting import Watched
from hvhost.speed.setting import Setting
from hvhost.speed.standing import Seen
from tests.speed.shape import check

LOOP = {"longest_s": 0.09, "run_s": 0.02, "p999_s": 0.004, "own_s": 0.006, "run_turn_own_s": 0.002, "turn_own_s": 0.008,
        "run_piece": "snapshot", "run_piece_own_s": 0.001, "read_s": 0.0001}


def test_a_loaded_daemon_is_watched(setting: Setting, monkeypatch: pytest.MonkeyPatch) -> None:
    """Everything is started, energised, watched for a second and ended; each budget has its lines."""
    monkeypatch.setattr(lasting, "SETTLE_S", 0.1)
    lines = lasting.measure(setting)
    check(lines, "B4", "B5", "B6")
    assert [line.budget for line in lines] == ["B4", "B4", "B4", "B4", "B5", "B6", "B6", "B6"]


@pytest.mark.parametrize(("bare_s", "judged"), [(0.004, True), (0.03, False)])
def test_a_machine_that_makes_a_bare_loop_wait_is_not_the_daemons_fault(bare_s: float, judged: bool) -> None:
    """The tail is judged where a bare loop's is better; the own part and the piece as measured always."""
    bare = {"longest_s": 0.08, "p999_s": bare_s, "swelling": 2.0}
    watched = Watched(seen=[], loop=LOOP, bare=bare, ends=["the MCU is silent"])
    tail, own, piece, less = lasting._stalls(watched, "an hour")
    assert tail.judged is judged
    assert own.measured == pytest.approx(6.0)
    assert "the whole of it 90.0 ms" in own.note
    assert "the MCU is silent" in own.note
    assert piece.measured == pytest.approx(10.0)
    assert piece.judged
    assert less.measured == pytest.approx(5.0)
    assert not less.judged


def test_memory_that_grows_is_seen() -> None:
    """The last fifth beside the second, which is past the start."""
    seen = [Seen(float(k), 60_000_000 + 100_000 * k, 20, 0.05 * k) for k in range(50)]
    watched = Watched(seen=seen, loop=LOOP)
    largest, growth, descriptors = lasting._memory(watched, "an hour")
    assert largest.measured == pytest.approx(64.9)
    assert growth.measured == pytest.approx(3.0)
    assert not growth.within
    assert descriptors.measured == 0.0
    assert lasting._processor(watched, "an hour").measured == pytest.approx(0.05)
