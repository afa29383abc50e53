"""The lease counts from the sample that was judged, and what its end means in each state."""

import pytest

from hvhost.wire.vocabulary import Cause, CutWhy, Inputs, LowerWhy, McuState, VoidWhy
from tests.standin.fakes import SESSION, Bench


def quiet(bench: Bench) -> Bench:
    """From here on the host is silent."""
    bench.renewing = False
    return bench


def test_a_renewal_extends_to_the_samples_tick_plus_the_lease():
    """Renewed late by an old sample, the lease ends one lease after that sample (PROTOCOL 9.4)."""
    bench = quiet(Bench())
    core = bench.mcu.core
    bench.pass_ms(300)
    index = core.index
    taken = bench.tick
    bench.pass_ms(300)
    bench.renew(index)
    assert core.lease.running
    bench.pass_ms(199)
    assert core.lease.running
    bench.pass_ms(1)
    assert bench.tick == taken + 5_000
    assert not core.lease.running


@pytest.mark.parametrize("which", ["future", "same", "older", "too old", "before the session"])
def test_a_renewal_that_proves_nothing_is_counted(which):
    """Not taken, not newer, or older than a lease: counted, and the lease is as it was (PROTOCOL 9.3)."""
    bench = quiet(Bench())
    core = bench.mcu.core
    bench.pass_ms(50)
    if which == "before the session":
        before = core.index
        bench.hello(session=77)
        bench.pass_ms(5)
        bench.renew(before)
    else:
        bench.renew(core.index)
        judged = core.index
        bench.pass_ms(650)
        bench.renew({"future": core.index + 1, "same": judged, "older": judged - 1,
                     "too old": core.index - 500}[which])
    assert core.lease.rejected == 1
    assert not core.lease.running


def test_renewals_of_another_session_do_nothing():
    """A host of yesterday cannot keep the lease (PROTOCOL 9.3)."""
    bench = quiet(Bench())
    bench.pass_ms(600)
    bench.session = SESSION + 1
    bench.renew(bench.mcu.core.index)
    assert not bench.mcu.core.lease.running


def test_a_host_that_judges_a_backlog_loses_the_lease():
    """Renewals come on time but for samples 600 ms old: energised, the lower starts and latches (PROTOCOL 9.8)."""
    bench = quiet(Bench().energised())
    for _ in range(1_000):
        bench.pass_ms(1)
        bench.renew(bench.mcu.core.index - 600)
        if bench.state is not McuState.ENERGISED:
            break
    assert bench.state is McuState.LOWERING
    assert bench.mcu.latched == Cause.HOST_SILENT
    assert bench.event("lowering").a == LowerWhy.LAPSE


@pytest.mark.parametrize("state", ["REQUESTED", "WARNING"])
def test_a_lapse_before_energising_voids_the_arm_without_a_latch(state):
    """Requested or warning: a cut, a void arm, no cause (PROTOCOL 9.7)."""
    bench = Bench()
    if state == "REQUESTED":
        bench.arm()
    else:
        bench.warned()
    quiet(bench).pass_ms(520)
    assert bench.dead
    assert bench.state is McuState.OFF
    assert bench.event("void").b == VoidWhy.LAPSE
    assert not bench.mcu.latched


def test_a_lapse_in_proving_voids_the_arm_by_a_cut():
    """A host that dies while the relay is being proven gets no output (PROTOCOL 9.7)."""
    bench = Bench()
    bench.board.forced[Inputs.DANGER] = False
    bench.arm()
    bench.press()
    assert bench.state is McuState.PROVING
    quiet(bench).pass_ms(520)
    assert bench.dead
    assert not bench.mcu.latched


def test_a_lapse_while_energised_lowers_and_latches_and_a_renewal_does_not_stop_it():
    """Within the lease the lower begins; a host that comes back only watches it (PROTOCOL 9.8, 9.11, S4)."""
    bench = quiet(Bench().energised())
    silent_since = bench.tick
    bench.until(McuState.LOWERING, 520)
    assert bench.tick - silent_since <= 5_000
    assert bench.seg(30000) == "state"
    bench.renewing = True
    bench.pass_ms(100)
    bench.renew(bench.mcu.core.index)
    assert bench.state is McuState.LOWERING
    bench.pass_ms(1_000)
    assert bench.dead
    assert bench.mcu.latched == Cause.HOST_SILENT
    assert bench.seg(100) == "state"


def test_a_lapse_while_pausing_cuts_and_latches():
    """No bench waits with its relay closed for a dead host (PROTOCOL 9.9)."""
    bench = Bench().energised(pause=(3, 1_000, 10_000))
    bench.arc(bench.mcu.core.index)
    assert bench.state is McuState.PAUSING
    quiet(bench).pass_ms(520)
    assert bench.dead
    assert bench.mcu.latched == Cause.HOST_SILENT
    assert bench.event("cut").a == CutWhy.LAPSE


def test_a_lapse_while_off_or_lowering_is_a_status_bit():
    """No event, no latch, and the next renewal sets the bit again (PROTOCOL 9.10)."""
    bench = quiet(Bench())
    number = bench.mcu.core.stream.number
    bench.pass_ms(800)
    assert not bench.blocks[-1].inputs & Inputs.LEASE
    assert bench.mcu.core.stream.number == number
    assert bench.arm() == "lease"
    bench.renewing = True
    bench.pass_ms(100)
    assert bench.blocks[-1].inputs & Inputs.LEASE
    bench.energised()
    bench.lower()
    quiet(bench).pass_ms(900)
    assert bench.state is McuState.LOWERING
    assert not bench.mcu.latched
