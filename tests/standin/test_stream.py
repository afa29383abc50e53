"""Blocks and events: consecutive, complete, bounded."""

from hvhost.wire.frames import Ok
from hvhost.wire.vocabulary import McuState
from tests.standin.fakes import Bench


def test_blocks_follow_each_other_index_by_index():
    """No sample is missing and none comes twice, whatever the MCU does meanwhile (PROTOCOL 8.2, S5)."""
    bench = Bench().energised(pause=(3, 300, 10_000))
    bench.arc(bench.mcu.core.index)
    bench.pass_ms(400)
    bench.seg(10_000, arc=1)
    bench.pass_ms(500)
    bench.lower()
    bench.pass_ms(2_000)
    follows = bench.blocks[0].index
    for block in bench.blocks:
        assert block.index == follows
        assert block.tick == (block.index + 1) * 10
        follows += block.pairs
    assert follows > 6_000


def test_a_block_closes_at_its_pairs_or_a_fifth_of_the_lease():
    """32 pairs at the default lease, fewer where a fifth of the lease is shorter (PROTOCOL 8.1)."""
    assert max(b.pairs for b in Bench(lease_ms=500).blocks) == 32
    bench = Bench(lease_ms=100, clear=False)
    bench.pass_ms(200)
    assert {b.pairs for b in bench.blocks} == {20}
    slow = Bench(lease_ms=500, sample_ticks=100, clear=False)
    slow.pass_ms(1_000)
    assert {b.pairs for b in slow.blocks} == {10}


def test_no_block_straddles_two_states():
    """A change of state closes the block, so its header holds for all its pairs."""
    bench = Bench().energised()
    bench.cut()
    tick = bench.tick
    bench.pass_ms(50)
    assert all(b.tick > tick or b.tick + 10 * (b.pairs - 1) <= tick for b in bench.blocks)
    assert next(b for b in bench.blocks if b.tick > tick).state == McuState.OFF


def test_no_block_leaves_before_the_first_greeting_events_do():
    """Events are told from the boot on, blocks from the greeting on (PROTOCOL 4.12)."""
    bench = Bench(hello=False)
    bench.pass_ms(200)
    assert not bench.blocks
    assert bench.kinds() == ["boot", "cause"]
    bench.hello()
    bench.pass_ms(50)
    assert bench.blocks[0].index >= 200


def test_a_missed_conversion_takes_an_index_and_closes_the_block():
    """The gap is between blocks and is counted (PROTOCOL 8.4)."""
    bench = Bench()
    bench.pass_ms(5)
    bench.mcu.miss = 3
    bench.pass_ms(100)
    gaps = [(a, b) for a, b in zip(bench.blocks, bench.blocks[1:], strict=False) if a.index + a.pairs != b.index]
    assert len(gaps) == 1
    assert gaps[0][1].index - gaps[0][0].index - gaps[0][0].pairs == 3
    assert gaps[0][1].missed == 3


def test_the_last_sixteen_events_can_be_asked_for_again():
    """`again` sends them as they were, and says when some are gone (PROTOCOL 8.8)."""
    bench = Bench().energised()
    bench.cut()
    bench.pass_ms(50)
    last = bench.mcu.core.stream.number
    known = {event.number: event for event in bench.events}
    before = len(bench.events)
    answer = bench.ask("again", str(last - 15))
    assert isinstance(answer, Ok)
    assert answer.words == ("16",)
    assert bench.events[before:] == [known[n] for n in range(last - 15, last + 1)]
    assert bench.code("again", str(last - 16)) == "gone"
    assert bench.ask("again", str(last + 1)).words == ("0",)


def test_where_nobody_reads_output_is_bounded_and_the_loss_counted():
    """Whole lines are dropped; memory does not grow (PROTOCOL 8.6)."""
    bench = Bench()
    bench.mcu.advance_to(bench.tick + 10 * 60_000 * 3)
    assert len(bench.mcu.core.stream.out) < 300_000
    assert bench.mcu.core.stream.dropped > 0
    assert bench.mcu.take_output().endswith(b"\n")
    assert bench.mcu.take_output() == b""


def test_values_beyond_31_bits_pass_as_signed():
    """A session number of 32 bits survives the event's signed fields (PROTOCOL 8)."""
    bench = Bench(hello=False)
    bench.hello(session=0xFFFFFFFE)
    assert bench.event("session").a == -2
