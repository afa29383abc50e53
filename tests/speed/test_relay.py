"""The process between a host and its board ends with what it stands between."""

import os
import pty

from hvhost.speed.relay import Relay

END_S = 20.0


def test_a_relay_ends_when_its_board_is_gone() -> None:
    """A terminal that hung up reads as empty for ever: nothing is left that turns without end."""
    master, slave = pty.openpty()
    with Relay(os.ttyname(slave)) as relay:
        os.close(slave)
        os.close(master)
        assert relay._child.wait(END_S) == 0
