"""Blocks in, sample blocks out: gaps, repeats, wraps, missed conversions, flags."""

from dataclasses import replace
from itertools import pairwise

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.samples.assembler import Assembler
from hvhost.samples.blocks import Flags, Orientation, SampleBlock
from tests.samples.build import PLAIN, wire


def feed(assembler: Assembler, *indices: int) -> list[SampleBlock | None]:
    """Take blocks of eight pairs, each arriving 10 ms after its last sample."""
    return [assembler.take(wire(index), (index + 7) * 1e-3 + 0.01) for index in indices]


def test_fields_pass_and_codes_are_oriented() -> None:
    """A negative bench with offsets: oriented = sign x (raw - zero); everything else passes unchanged."""
    orientation = Orientation(v_sign=-1, v_zero=30, i_sign=1, i_zero=-5, v_limits=(-2048, 2047),
                              i_limits=(-2048, 2047), v_band=10, i_band=10)
    raw = wire(4, (30, -5, -970, 95))
    block = Assembler(orientation, 10_000, 10).take(raw, 1.5)
    assert block is not None
    assert (block.v, block.i) == ((0, 1000), (0, 100))
    assert (block.index, block.tick, block.v_word, block.i_word, block.state, block.latched, block.inputs, block.event,
            block.arc, block.arrival_s, block.gap, block.flags, block.raw) == (
                4, 40, 500, 600, 4, True, 15, 3, 2, 1.5, 0, Flags(0), raw)


def test_missing_pairs_are_a_marked_gap() -> None:
    """A step of the index is a gap with its length, flagged and counted as lost."""
    assembler = Assembler(PLAIN, 10_000, 10)
    blocks = [b for b in feed(assembler, 0, 8, 40, 48) if b]
    assert [b.gap for b in blocks] == [0, 0, 24, 0]
    assert [b.flags for b in blocks] == [Flags(0), Flags(0), Flags.GAP, Flags(0)]
    assert (assembler.counters.gaps, assembler.counters.lost) == (1, 24)


def test_missed_conversions_take_an_index_and_are_not_lost_on_the_wire() -> None:
    """The MCU's own misses are counted apart from what the wire lost."""
    assembler = Assembler(PLAIN, 10_000, 10)
    assembler.take(wire(0, missed=2**32 - 1), 0.0)
    block = assembler.take(wire(11, missed=1), 0.01)
    assert block is not None
    assert (block.gap, block.flags) == (3, Flags.GAP | Flags.MISSED)
    assert (assembler.counters.missed, assembler.counters.lost) == (2, 1)


@pytest.mark.parametrize(("again", "repeated", "backward"), [(8, 1, 0), (12, 1, 0), (0, 0, 1)])
def test_repeated_and_backward_blocks_are_refused(again: int, repeated: int, backward: int) -> None:
    """What was seen before is refused and counted, and the next good block says so."""
    assembler = Assembler(PLAIN, 10_000, 10)
    found = feed(assembler, 0, 8, again, 16, 24)
    assert found[2] is None
    assert [b.flags if b else None for b in found[3:]] == [Flags.REPEATED, Flags(0)]
    assert (assembler.counters.repeated, assembler.counters.backward) == (repeated, backward)


def test_an_empty_block_is_refused() -> None:
    """No pairs, no sample block."""
    assembler = Assembler(PLAIN, 10_000, 10)
    assert assembler.take(wire(0, ()), 0.0) is None
    assert assembler.counters.empty == 1


@pytest.mark.parametrize("start", [2**31 - 16, 2**32 - 16, 2**32 // 10 * 10 - 16])
def test_indices_and_ticks_run_on_through_a_wrap(start: int) -> None:
    """At 2^31 and 2^32, of the index or of the tick, nothing jumps and nothing is a gap."""
    assembler = Assembler(PLAIN, 10_000, 10)
    blocks = [b for b in (assembler.take(wire(start + 8 * k), 0.008 * k) for k in range(8)) if b]
    assert [b.index for b in blocks] == [start + 8 * k for k in range(8)]
    assert [b.tick - blocks[0].tick for b in blocks] == [80 * k for k in range(8)]
    assert all(b.gap == 0 and not b.flags for b in blocks)


def test_a_tick_that_does_not_fit_its_index_is_counted() -> None:
    """An off-beat tick is taken as it is, never backwards, and counted."""
    assembler = Assembler(PLAIN, 10_000, 10)
    feed(assembler, 0, 8)
    block = assembler.take(wire(16, tick=165), 0.034)
    assert block is not None
    assert (block.tick, assembler.counters.off_beat) == (165, 1)
    block = assembler.take(wire(24, tick=3), 0.042)
    assert block is not None
    assert (block.tick, assembler.counters.off_beat) == (245, 2)


@pytest.mark.parametrize(("codes", "flags"), [
    ((32767, 0), Flags.LIMIT_V), ((0, 32767), Flags.LIMIT_I), ((-32768, 0), Flags.LIMIT_V | Flags.REVERSED_V),
    ((-21, 0), Flags.REVERSED_V), ((-20, -20), Flags(0)), ((0, -21), Flags.REVERSED_I)])
def test_odd_codes_raise_their_flags(codes: tuple[int, int], flags: Flags) -> None:
    """Codes at the converter's limit and codes of the wrong sign are flagged on their channel."""
    block = Assembler(PLAIN, 10_000, 10).take(wire(0, (*codes, 5, 5)), 0.0)
    assert block is not None
    assert block.flags == flags


def test_a_block_that_arrives_late_is_stale() -> None:
    """Late against the fastest arrivals by more than a reading may be old: flagged and counted."""
    assembler = Assembler(PLAIN, 10_000, 10, stale_s=0.1)
    feed(assembler, 0, 8, 16)
    late = assembler.take(wire(24), 0.031 + 0.01 + 0.2)
    assert late is not None
    assert late.flags == Flags.STALE
    assert assembler.counters.stale == 1


@given(st.lists(st.tuples(st.integers(-40, 3000), st.integers(0, 9)), max_size=30))
def test_any_order_of_blocks_yields_rising_samples_whose_gaps_add_up(steps: list[tuple[int, int]]) -> None:
    """Whatever comes, indices only rise and pairs plus gaps fill everything from the first to the last."""
    assembler = Assembler(PLAIN, 10_000, 10)
    at, out = 100, []
    for step, pairs in steps:
        at += step
        block = assembler.take(wire(at, (1, 2) * pairs), at * 1e-3)
        out += [block] if block else []
    for before, after in pairwise(out):
        assert after.index == before.last_index + 1 + after.gap
        assert after.tick >= before.last_tick
    assert assembler.counters.pairs == sum(b.pairs for b in out)


def test_the_same_blocks_give_the_same_sample_blocks() -> None:
    """A replay with the recorded arrival times repeats flags and ticks."""
    raws = [(wire(8 * k), 0.008 * k + (0.7 if k == 5 else 0.0)) for k in range(9) if k != 3]
    one, two = Assembler(PLAIN, 10_000, 10), Assembler(PLAIN, 10_000, 10)
    assert [one.take(*raw) for raw in raws] == [two.take(replace(raw[0]), raw[1]) for raw in raws]
