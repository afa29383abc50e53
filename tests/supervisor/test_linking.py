"""Which board answers after the port was lost: the one that was greeted, or another under its name."""

from dataclasses import replace

import pytest

from hvhost.supervisor.linking import stranger
from hvhost.supervisor.states import LinkState
from hvhost.wire.greeting import McuInfo
from hvhost.words.errors import CommandRefused
from tests.supervisor.lab import Lab


@pytest.fixture
def info(lab: Lab) -> McuInfo:
    """What the demonstration bench's board says of itself."""
    lab.greet()
    assert lab.core.greeting is not None
    return lab.core.greeting.info


def test_the_same_board_is_known_whatever_happened_to_it(info: McuInfo) -> None:
    """Never greeted, greeted again, restarted once or many times: it may be the same."""
    assert stranger(None, info) == ""
    assert stranger(info, info) == ""
    for boots in (1, 2, 1000):
        assert stranger(info, replace(info, boot=info.boot + boots)) == ""


def test_another_firmware_or_fewer_boots_is_another_board(info: McuInfo) -> None:
    """Both are named, with what to do."""
    known = replace(info, boot=12)
    assert stranger(known, replace(known, boot=11)) == (
        f"another board answers: {info.firmware}, boot 11; it was {info.firmware}, boot 12; "
        "if that is meant, end the daemon and start it again")
    assert "other-7, boot 12" in stranger(known, replace(known, firmware="other-7"))


def test_another_board_on_the_same_port_is_observed_only_until_the_first_is_back(lab: Lab) -> None:
    """Settings that agree do not help: nothing is armed on a board that nobody chose."""
    lab.ready()
    known = lab.core.known
    assert known is not None
    lab.core.known = replace(known, boot=41)
    lab.unplug()
    lab.plug().until(lambda: lab.core.state.link is LinkState.OBSERVE, 5.0)
    assert lab.core.link_text.startswith("observe only: another board answers: standin-demo, boot 1; ")
    with pytest.raises(CommandRefused):
        lab.prepare()
    lab.ask("lower")  # a stop still goes out
    lab.unplug()
    lab.core.known = known
    lab.plug().until(lambda: lab.core.state.link is LinkState.GREETED, 5.0)
