"""Greeting, losing and finding an MCU again."""

import pytest

from hvhost.supervisor.linking import RELINK_S
from hvhost.supervisor.states import LinkState, Permission, Voltage
from hvhost.wire.vocabulary import Cause
from tests.supervisor.lab import DEMO, Lab


def test_a_greeting_takes_over_what_the_mcu_says(lab: Lab) -> None:
    """Causes, counters, settings; nothing is armed, nothing claimed."""
    lab.greet()
    assert lab.core.state.link is LinkState.GREETED
    assert lab.core.state.latched == Cause.RESTARTED
    assert lab.core.state.voltage is Voltage.UNKNOWN
    assert lab.core.greeting is not None
    assert lab.core.greeting.settings == DEMO.settings()


def test_an_mcu_that_does_not_answer_is_tried_again(lab: Lab) -> None:
    """Lost after the hello's tries, greeted as soon as it answers."""
    lab.fault("mute")
    lab.station.connect()
    lab.until(lambda: lab.core.state.link is LinkState.LOST, 5.0)
    assert lab.core.relink_at == pytest.approx(lab.now_s + RELINK_S, abs=0.01)
    lab.mend("mute").until(lambda: lab.core.state.link is LinkState.GREETED, 5.0)


def test_a_silence_of_an_idle_bench_loses_the_link_and_the_reading(lab: Lab) -> None:
    """No claim from an old block (S13), and the picture shows no number."""
    lab.ready()
    lab.fault("mute").pass_s(0.7)
    assert lab.core.state.link is LinkState.LOST
    assert lab.picture().reading is None
    assert lab.core.state.voltage is Voltage.UNKNOWN


def test_another_session_ends_ours(lab: Lab) -> None:
    """Somebody else greeted the MCU: ours is over, and tried again after a pause."""
    lab.ready()
    old = lab.core.link
    lab.board.feed(_hello())
    lab.until(lambda: lab.core.state.link is LinkState.LOST, 2.0)
    lab.until(lambda: lab.core.state.link is LinkState.GREETED, 5.0)
    assert lab.core.link is not old


def _hello() -> bytes:
    from hvhost.wire.frames import Hello, encode_request
    from hvhost.wire.lines import seal

    return seal(encode_request(Hello(n=(1 << 31) + 5, session=99, version=1, lease_ms=500)))


def test_numbers_of_stops_go_on_in_the_next_session(lab: Lab) -> None:
    """An answer to an old stop confirms no new one."""
    lab.ready()
    first = lab.ask("cut")["number"]
    lab.pass_s(0.2).unplug().plug()
    lab.until(lambda: lab.core.state.link is LinkState.GREETED, 5.0)
    assert lab.ask("cut")["number"] > first


def test_a_prepared_run_is_cancelled_by_a_lost_link(lab: Lab) -> None:
    """It was never armed, so it was not interrupted."""
    lab.ready().prepare()
    lab.unplug()
    assert lab.run.outcome == "cancelled"
    assert lab.permission is Permission.IDLE


def test_time_goes_on_through_the_wrap_of_the_ticks(lab: Lab) -> None:
    """Bleed times are counted by differences of 32-bit ticks."""
    lab.ready()
    core = lab.core
    at = core.time_at(core.sample.tick)  # type: ignore[union-attr]
    assert core.last_tick is not None
    core.t_s += ((core.last_tick + (1 << 32) - 5_000 - core.last_tick + (1 << 31)) % (1 << 32) - (1 << 31)) / 1e4
    assert core.time_at(core.sample.tick) == pytest.approx(at - 0.5)  # type: ignore[union-attr]
