"""The arc reaction on both lines of defence: pause, count, rest, resume, latch."""

import pytest

from hvhost.wire.vocabulary import Cause, CutWhy, HostRule, McuState
from tests.standin.fakes import SETTINGS, Bench

PAUSE = (3, 300, 10_000)


def arced(bench: Bench, ms: int = 3) -> Bench:
    """The specimen breaks down and stays low."""
    bench.board.level = 0.0
    bench.board.v = 0
    bench.pass_ms(ms)
    bench.board.v = None
    return bench


def paused(pause: tuple[int, int, int] = PAUSE, **changes: int) -> Bench:
    """Energised with a pause declared, then one arc that the MCU saw."""
    bench = arced(Bench(SETTINGS.with_(**changes)).energised(pause=pause))
    assert bench.state is McuState.PAUSING
    return bench


def resumed(bench: Bench, v: int = 20_000) -> Bench:
    """After the rest, up again by the segment that carries the arc's number."""
    bench.pass_ms(320)
    assert bench.seg(v, arc=bench.mcu.core.reaction.number) == ""
    bench.pass_ms(1_100)
    return bench


def test_a_pause_stops_the_output_and_leaves_the_relay_closed():
    """Inhibit and clear asserted, words zero, queue empty, power on (PROTOCOL 11.3, 11.14)."""
    bench = paused()
    board = bench.board
    assert board.inhibit
    assert board.clear
    assert board.relay
    assert bench.mcu.v_word == bench.mcu.i_word == 0
    assert not bench.mcu.core.points.queue
    assert not bench.mcu.latched
    assert bench.blocks[-1].arc <= 1
    assert bench.event("pausing").a == 1


def test_without_a_pause_declared_the_first_arc_latches():
    """`latch` is the default (PROTOCOL 11.1)."""
    bench = arced(Bench().energised())
    assert bench.dead
    assert bench.mcu.latched == Cause.BREAKDOWN
    assert bench.event("cut").a == CutWhy.ARC


def test_overcurrent_without_a_collapse_latches_relay_included():
    """What does not collapse within w samples was no arc (PROTOCOL 11.4)."""
    bench = Bench().energised(pause=PAUSE)
    bench.board.i = 25_000
    bench.pass_ms(2)
    assert bench.state is McuState.PAUSING
    assert bench.board.relay
    bench.board.i = None
    bench.pass_ms(6)
    assert bench.dead
    assert bench.mcu.latched == Cause.OVERCURRENT


@pytest.mark.parametrize("late", [0, 1, 3])
def test_overcurrent_with_a_collapse_near_it_is_one_arc(late):
    """The collapse may come with the overcurrent or within w samples behind it (PROTOCOL 11.4)."""
    bench = Bench().energised(pause=PAUSE)
    bench.board.i = 25_000
    bench.pass_ms(2 if late == 0 else 1 + late)
    bench.board.level = 0.0
    bench.board.i = None
    bench.pass_ms(20)
    assert bench.state is McuState.PAUSING
    assert bench.mcu.core.reaction.number == 1


def test_the_rest_cannot_be_shortened_and_the_segment_must_carry_the_arcs_number():
    """Before the rest `rest`, without the number `arc`; then energised from zero, at that tick (PROTOCOL 11.11)."""
    bench = paused()
    assert bench.seg(20_000, arc=1) == "rest"
    bench.pass_ms(320)
    assert bench.seg(20_000) == "arc"
    assert bench.seg(20_000, arc=2) == "arc"
    assert bench.seg(60_001, arc=1) == "ceiling"
    assert bench.state is McuState.PAUSING
    assert bench.seg(20_000, arc=1) == ""
    assert bench.state is McuState.ENERGISED
    assert not bench.board.inhibit
    assert bench.mcu.v_word == 0
    assert bench.event("resumed").a == 1
    assert bench.event("segment").tick == bench.event("resumed").tick
    bench.pass_ms(1_100)
    assert bench.mcu.v_word == 20_000
    assert bench.state is McuState.ENERGISED


def test_one_arc_too_many_in_the_window_latches():
    """Three may pause, the fourth within ten seconds latches `arc count` (PROTOCOL 11.5)."""
    bench = paused()
    for _ in range(2):
        arced(resumed(bench))
        assert bench.state is McuState.PAUSING
    arced(resumed(bench))
    assert bench.dead
    assert bench.mcu.latched == Cause.ARC_COUNT


def test_arcs_older_than_the_window_no_longer_count():
    """The window slides (PROTOCOL 11.5)."""
    bench = paused((1, 300, 10_000))
    resumed(bench)
    bench.pass_ms(9_000)
    arced(bench)
    assert bench.state is McuState.PAUSING


def test_the_total_per_arm_is_the_eeproms():
    """However far apart, `arctotal` arcs are the most (PROTOCOL 11.5)."""
    bench = paused((3, 300, 10_000), arctotal=1)
    resumed(bench)
    bench.pass_ms(20_000)
    arced(bench)
    assert bench.mcu.latched == Cause.ARC_COUNT


def test_a_restrike_soon_after_belongs_to_the_arc_a_later_one_latches():
    """Within `restrike` ms it is counted, later in the rest it latches `arc in the rest` (PROTOCOL 11.10)."""
    for wait_ms, latched in ((12, False), (60, True)):
        bench = paused()
        bench.board.level = 8_000.0
        bench.mcu.core.rules.stop_envelope = 8_000 << 16
        bench.pass_ms(wait_ms - 3)
        arced(bench, 4)
        assert (bench.mcu.latched == Cause.ARC_IN_REST) is latched
        assert bench.dead is latched
        assert bench.kinds().count("restrike") == (0 if latched else 1)


def test_a_specimen_that_leaks_in_the_rest_does_not_latch():
    """A fall faster than the bleed time but slow against w samples is a discharge, no collapse (PROTOCOL 10.6)."""
    bench = Bench().energised(pause=(3, 2_000, 10_000))
    bench.board.tau_s = 0.1
    assert bench.arc(bench.mcu.core.index).words == ("1",)
    bench.pass_ms(1_500)
    assert bench.state is McuState.PAUSING
    assert "restrike" not in bench.kinds()
    bench.lower()
    bench.pass_ms(1_500)
    assert "offseen" not in bench.kinds()


def test_a_readback_above_the_envelope_in_the_rest_latches():
    """With the output inhibited nothing may rise above what bleeds away (PROTOCOL 11.10)."""
    bench = paused((3, 1_000, 10_000))
    bench.pass_ms(600)
    bench.board.v = 9_000
    bench.pass_ms(3)
    assert bench.dead
    assert bench.mcu.latched == Cause.ARC_IN_REST


def test_a_pause_that_nobody_ends_expires():
    """Thirty seconds after the rest: cut and latched (PROTOCOL 11.12)."""
    bench = paused()
    bench.pass_ms(30_280)
    assert bench.state is McuState.PAUSING
    bench.pass_ms(40)
    assert bench.dead
    assert bench.mcu.latched == Cause.PAUSE_EXPIRED


def test_an_arc_seen_by_the_host_only_pauses_once():
    """The host's verdict is an arc of its own, whatever the MCU saw (PROTOCOL 11.9)."""
    bench = Bench().energised(pause=PAUSE)
    index = bench.mcu.core.index - 5
    assert bench.arc(index).words == ("1",)
    assert bench.state is McuState.PAUSING
    stop = bench.stop
    assert bench.arc(index, stop).words == ("1",)  # repeated every 20 ms until answered: by sample index
    assert bench.mcu.core.reaction.number == 1
    resumed(bench)
    assert bench.arc(index).words == ("1",)  # a straggler after the resume does not pause again
    assert bench.state is McuState.ENERGISED


@pytest.mark.parametrize("offset", [-5, -2, 0, 3, 100])
def test_one_arc_seen_by_mcu_and_host_at_different_samples_counts_once(offset):
    """From w samples before the collapse to the rest's end, a host's index is this arc (PROTOCOL 11.8)."""
    bench = paused()
    index = bench.event("pausing").b
    bench.pass_ms(150)
    if offset >= -4:
        assert bench.arc(index + offset).words == ("1",)
        assert bench.event("merged").a == 1
        assert bench.mcu.core.reaction.number == 1
    else:
        assert bench.arc(index + offset).words == ("2",)  # an earlier arc that only the host saw
        assert bench.state is McuState.PAUSING


def test_a_hosts_arc_makes_an_overcurrent_an_arc():
    """A verdict within the span says that it collapsed (PROTOCOL 11.4, 11.8)."""
    bench = Bench().energised(pause=PAUSE)
    bench.board.i = 25_000
    bench.pass_ms(2)
    bench.board.i = None
    assert bench.arc(bench.mcu.core.index).words == ("1",)
    bench.pass_ms(20)
    assert bench.state is McuState.PAUSING


@pytest.mark.parametrize("state", ["LOWERING", "WARNING", "latch mode", "PROVING"])
def test_where_no_pause_applies_a_hosts_arc_is_a_cut_and_latches(state):
    """While lowering, in the warning, in latch mode: cut, relay included, `host` (PROTOCOL 11.6)."""
    bench = Bench()
    if state == "WARNING":
        bench.warned(pause=PAUSE)
    else:
        bench.energised(pause=None if state == "latch mode" else PAUSE)
    if state in ("LOWERING", "PROVING"):
        bench.lower()
    assert bench.arc(bench.mcu.core.index).words == ("0",)
    assert bench.dead
    assert bench.mcu.latched == Cause.HOST_RULE
    assert bench.eeprom.kept.rule == HostRule.BREAKDOWN


def test_a_hosts_arc_behind_the_mcus_own_trip_adds_nothing():
    """The same arc, latched already: merged, and the set of causes is as it was (PROTOCOL 11.8)."""
    bench = arced(Bench().energised())
    assert bench.arc(bench.mcu.core.index).words == ("1",)
    assert bench.mcu.latched == Cause.BREAKDOWN


def test_a_lower_while_pausing_cuts():
    """There is nothing to lower: off, without a latch (PROTOCOL 11.7)."""
    bench = paused()
    bench.lower()
    assert bench.dead
    assert not bench.mcu.latched
    bench.pass_ms(400)
    assert bench.seg(100, arc=1) == "state"


def test_after_a_latch_an_arc_does_not_pause():
    """With any latch the reaction is a cut (PROTOCOL 11.6)."""
    bench = Bench().energised(pause=PAUSE)
    bench.mcu.core.latch.add(Cause.HOST_SILENT, 0)
    arced(bench)
    assert bench.dead


def test_an_arc_after_the_rest_before_the_resume_latches():
    """The output is off: what the host saw then is no arc of the run (PROTOCOL 11.10)."""
    bench = paused()
    bench.pass_ms(500)
    assert bench.arc(bench.mcu.core.index).words == ("0",)
    assert bench.mcu.latched == Cause.ARC_IN_REST


def test_a_stale_arc_number_is_refused_while_energised():
    """A segment that carries another pause's number is of another time (PROTOCOL 11.11)."""
    bench = resumed(paused())
    assert bench.seg(21_000, arc=2) == "arc"
    assert bench.seg(21_000, arc=1) == ""
