"""Following a daemon from another process."""

from dataclasses import replace
from pathlib import Path

import pytest

from hvhost.publish.following import Follower
from hvhost.publish.local import LocalLimits
from hvhost.words.errors import CannotConnect
from tests.pictures.states import IDLE, RUNNING, TRIPPED
from tests.publish.serving import served


def test_changes_are_put_together(tmp_path: Path) -> None:
    """After any number of partial notifications the follower holds exactly the last snapshot."""
    with served(tmp_path) as bench:
        follower = Follower(bench.path, 20.0)
        follower.open(0.0)
        for n, snapshot in enumerate((IDLE, RUNNING, TRIPPED), start=1):
            bench.publish(replace(snapshot, now_s=float(n)))
            assert follower.wait_change(float(n), 10.0)
            assert follower.snapshot == replace(snapshot, now_s=float(n))
            assert follower.came_s == float(n)
        follower.close()
        assert not follower.connected


def test_a_daemon_that_went_away_is_tried_again(tmp_path: Path) -> None:
    """The last snapshot stays known as such, and once a second the daemon is tried."""
    with served(tmp_path) as bench:
        follower = Follower(bench.path, 20.0)
        follower.open(0.0)
        bench.publish(RUNNING)
        assert follower.wait_change(1.0, 10.0)
    assert not follower.wait_change(2.0, 10.0)
    assert not follower.connected
    assert follower.snapshot == RUNNING
    follower.wait_change(3.0, 0.0)
    with served(tmp_path):
        follower.wait_change(3.5, 0.0)
        assert not follower.connected
        follower.wait_change(4.1, 0.0)
        assert follower.connected
        follower.close()


def test_no_daemon_at_the_start_is_an_error(tmp_path: Path) -> None:
    """Nothing to follow is said at once."""
    with pytest.raises(CannotConnect):
        Follower(str(tmp_path / "none.sock"), 10.0).open(0.0)


def test_a_refused_subscription_is_an_error(tmp_path: Path) -> None:
    """A daemon with too many views tells the next one."""
    with served(tmp_path, LocalLimits(clients=0)) as bench, pytest.raises(CannotConnect, match="too many clients"):
        Follower(bench.path, 10.0).open(0.0)
