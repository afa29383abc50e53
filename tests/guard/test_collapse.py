"""The collapse and what explains a fall."""

import json
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from hvhost.guard.collapse import Fallen, ended, history_needed
from hvhost.guard.guard import Guard
from hvhost.guard.limits import GuardLimits
from hvhost.guard.verdicts import Severity, Verdict
from hvhost.wire.vocabulary import HostRule, McuState
from tests.guard.build import block, cut, limits

# Synthetic circuit-simulation recordings (averaged supply with cable, tip resistor, load and converters),
# cut to 128 samples around the event and given as integer codes.
SNIPPETS: list[dict[str, Any]] = json.loads((Path(__file__).parent / "snippets.json").read_text())


def arcs(guard: Guard, v: list[int], i: list[int], words: list[int], size: int = 32) -> list[Verdict]:
    """The breakdown verdicts over a stream."""
    return [x for each in cut(v, i, words, size) for x in guard.judge(each) if x.rule is HostRule.BREAKDOWN]


@pytest.mark.parametrize("snippet", SNIPPETS, ids=lambda s: s["name"])
@pytest.mark.parametrize("size", [8, 32, 64])
def test_recordings_lead_to_a_breakdown_only_where_there_was_one(snippet: dict[str, Any], size: int) -> None:
    """Arcs are found; mains dips, set-point steps, crossover, ramp charging and interference are not."""
    far = 1 << 20
    guard = Guard(limits(
        overcurrent=far, overvoltage=far, v_limits=(-far, far), i_limits=(-far, far), zero_band=far, i_band=far,
        missing_word=far, **{key: snippet[key] for key in (
            "rate_hz", "v_map_q16", "i_map_q16", "drain_q16", "delay_samples", "drop", "drop_samples")}))
    assert bool(arcs(guard, snippet["v"], snippet["i"], snippet["word"], size)) is snippet["breakdown"]


def test_a_sudden_fall_is_a_breakdown_at_its_second_sample() -> None:
    """The readback falls by more than D at once: an arc at the n-th fallen sample, with what was unexplained."""
    (found,) = arcs(Guard(limits()), [10000] * 20 + [2000] * 12, [10] * 32, [10000] * 32)
    assert (found.severity, found.index, found.limit, found.measured) == (Severity.ARC, 21, 1000, 8000)
    assert found.text == "voltage collapsed from 10.000 kV: 8.000 kV unexplained"


def test_a_window_shorter_than_the_persistence_still_finds_a_step() -> None:
    """The base stays where the fall began, so n may be larger than w."""
    assert arcs(Guard(limits(drop_samples=1, persist=4)), [10000] * 20 + [2000] * 12, [10] * 32, [10000] * 32)


def test_one_low_sample_and_one_high_sample_are_interference() -> None:
    """A single low sample is counted; a single high one is no level to fall from."""
    guard = Guard(limits())
    assert not arcs(guard, [10000] * 20 + [0] + [10000] * 11, [10] * 32, [10000] * 32)
    assert guard.interfering == {HostRule.BREAKDOWN: 1}
    assert not arcs(Guard(limits()), [10000] * 20 + [20000] + [10000] * 11, [10] * 32, [10000] * 32)


def test_a_fall_of_the_words_explains_the_readbacks_fall() -> None:
    """A ramp down by more than D over w is explained by the words of this block and the ones around it."""
    words = [10000 - 40 * k for k in range(96)]
    v = [10000] * 4 + words[:-4]
    lim = limits(drop=300, fall_q16=40 << 16)
    assert not arcs(Guard(lim), v, [10] * 96, words)
    v[60:] = [max(0, code - 5000) for code in v[60:]]
    assert len(arcs(Guard(lim), v, [10] * 96, words)) == 1


def test_a_set_point_step_is_explained_within_the_programming_delay() -> None:
    """A step of the words at a block's start explains the fall that follows it by the delay."""
    words = [10000] * 32 + [5000] * 32
    v = [10000] * 34 + [5000] * 30
    assert not arcs(Guard(limits()), v, [10] * 64, words)


def test_the_loads_own_current_explains_a_dip_of_the_mains_but_never_more_than_half() -> None:
    """v falls by i/C a sample with the current that flowed before; a fall to zero is an arc whatever flowed."""
    v = [10000] * 30 + [10000 - 300 * k for k in range(1, 17)] + [5200] * 18
    lim = limits(drain_q16=65536)
    assert arcs(Guard(lim), v, [10] * 64, [10000] * 64)
    assert not arcs(Guard(lim), v, [300] * 64, [10000] * 64)
    gone = [10000] * 30 + [0] * 34
    assert arcs(Guard(lim), gone, [2900] * 64, [10000] * 64)


def test_a_collapse_behind_a_gap_is_found() -> None:
    """Missing pairs between high and low do not hide a fall."""
    guard = Guard(limits())
    guard.judge(block(0, [10000] * 32, [10] * 32, v_word=10000))
    found = guard.judge(block(64, [1000] * 32, [10] * 32, v_word=10000, gap=32))
    assert HostRule.BREAKDOWN in {x.rule for x in found}


def test_every_strike_is_told() -> None:
    """A readback that recovers and falls again is another verdict, within one block or not."""
    v = [10000] * 8 + [1000] * 4 + [10000] * 8 + [1000] * 12
    assert [x.index for x in arcs(Guard(limits()), v, [10] * 32, [10000] * 32, 16)] == [9, 21]
    v = [10000] * 20 + [1000] * 14 + [10000] * 8 + [1000] * 22
    assert [x.index for x in arcs(Guard(limits()), v, [10] * 64, [10000] * 64)] == [21, 43]


def test_history_begins_anew_when_the_output_was_off_or_pausing() -> None:
    """What the readback was before the rule came to life is nothing to fall from."""
    guard = Guard(limits())
    guard.judge(block(0, [9000] * 32, [0] * 32, state=McuState.PAUSING))
    assert guard.judge(block(32, [0] * 32, [0] * 32, state=McuState.ENERGISED)) == ()


def test_a_fall_is_judged_while_lowering_too() -> None:
    """Lowering keeps the rule alive, with the fall of its words explained."""
    lim = limits(fall_q16=100 << 16)
    words = [10000 - 100 * k for k in range(64)]
    blocks = cut(words, [10] * 64, words, 32, state=McuState.LOWERING)
    assert all(Guard(lim).judge(each) == () for each in blocks)
    broken = replace(blocks[1], v=(*words[32:40], *[0] * 24))
    guard = Guard(lim)
    guard.judge(blocks[0])
    assert [x.rule for x in guard.judge(broken)] == [HostRule.BREAKDOWN]


def test_history_covers_window_delay_and_persistence() -> None:
    """A block back is enough exactly where it holds the window, the delay before it and the n that hold a base."""
    assert history_needed(limits(drop_samples=8, delay_samples=4, persist=2)) == 15


def test_a_confirmed_fall_leaves_its_energy_behind() -> None:
    """When a fall ends, its energy counts on and a short one is counted as interfering."""
    lim: GuardLimits = limits(stored_q16=65536)
    fallen = Fallen(since=3, run=4, confirmed=True, base=100, lowest=-5, energy=50, total=7)
    assert ended(fallen, lim) == Fallen(since=3, total=7 + 50 + 10000)
    assert ended(Fallen(since=3, run=1, energy=9), lim, since=8) == Fallen(since=8, odd=1)
