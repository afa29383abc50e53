"""The guard against its slow twin, and against itself with the samples cut into other blocks."""

from dataclasses import replace

from hypothesis import given, settings
from hypothesis import strategies as st

from hvhost.guard.guard import Guard
from hvhost.guard.limits import GuardLimits
from hvhost.samples.blocks import SampleBlock
from hvhost.wire.vocabulary import HostRule
from tests.guard.build import block, cut, limits
from tests.guard.slow_twin import Twin

V_LEVELS = [-60, -51, -50, 0, 50, 51, 4000, 9000, 9999, 10000, 10001, 10999, 11000, 11001, 21000, 21001, 32767]
I_LEVELS = [-60, -50, 0, 10, 400, 1999, 2000, 2001, 3000, 3001, 32767]
WORDS = [0, 999, 1000, 5000, 9500, 10000, 20000]
stretch = st.tuples(st.integers(1, 14), st.sampled_from(V_LEVELS), st.sampled_from(I_LEVELS), st.sampled_from(WORDS),
                    st.integers(0, 3), st.integers(-120, 120))
adversarial_limits = st.builds(
    limits, persist=st.integers(1, 4), drop_samples=st.integers(1, 12), delay_samples=st.integers(0, 9),
    fall_q16=st.sampled_from([0, 40 << 16]), drain_q16=st.sampled_from([0, 3000, 65536]),
    level=st.sampled_from([0, 2000]), level_samples=st.integers(1, 20), stuck_samples=st.sampled_from([0, 5, 40]),
    saturated_samples=st.integers(1, 9), missing_samples=st.integers(1, 9))


def series(stretches: list[tuple[int, int, int, int, int, int]]) -> tuple[list[int], list[int], list[int]]:
    """Per-sample v, i and word: levels with a little pattern on them, and slopes."""
    v: list[int] = []
    i: list[int] = []
    words: list[int] = []
    for length, level, current, word, noise, slope in stretches:
        for k in range(length):
            v.append(level + (k * 7 % (noise + 1)) + slope * k)
            i.append(current + (k * 5 % (noise + 1)))
            words.append(word)
    return v, i, words


def blocks_of(stretches: list[tuple[int, int, int, int, int, int]], sizes: list[int],
              gaps: list[int]) -> list[SampleBlock]:
    """Cut the series into blocks of the given sizes, with the given gaps before them (both repeated)."""
    v, i, words = series(stretches)
    made: list[SampleBlock] = []
    at = index = 0
    while at < len(v):
        size = sizes[len(made) % len(sizes)]
        gap = gaps[len(made) % len(gaps)] if made else 0
        index += gap
        made.append(block(index, v[at:at + size], i[at:at + size], v_word=words[at], gap=gap))
        index += len(v[at:at + size])
        at += size
    return made


def run(limit: GuardLimits, blocks: list[SampleBlock]) -> tuple[list[tuple[str, int]], dict[str, int]]:
    """The guard's verdicts as (rule name, index), and its interfering counts."""
    guard = Guard(limit)
    found = [(verdict.rule.name, verdict.index) for each in blocks for verdict in guard.judge(each)]
    return found, {rule.name: count for rule, count in guard.interfering.items()}


@settings(max_examples=300, deadline=None)
@given(limit=adversarial_limits, stretches=st.lists(stretch, min_size=1, max_size=14),
       sizes=st.lists(st.integers(1, 40), min_size=1, max_size=5), gaps=st.lists(st.sampled_from([0, 0, 0, 1, 7, 300]),
                                                                              min_size=1, max_size=6))
def test_guard_and_slow_twin_agree_on_adversarial_blocks(
        limit: GuardLimits, stretches: list[tuple[int, int, int, int, int, int]], sizes: list[int],
        gaps: list[int]) -> None:
    """On any blocks the guard gives the twin's verdicts at the twin's samples and counts the same interference."""
    blocks = blocks_of(stretches, sizes, gaps)
    twin = Twin(limit)
    twin.judge(blocks)
    found, odd = run(limit, blocks)
    assert sorted(found) == sorted(twin.hits)
    assert odd == twin.odd


@settings(max_examples=100, deadline=None)
@given(limit=adversarial_limits, stretches=st.lists(stretch, min_size=1, max_size=14))
def test_verdicts_do_not_depend_on_the_cut_into_blocks(
        limit: GuardLimits, stretches: list[tuple[int, int, int, int, int, int]]) -> None:
    """With the words at rest, blocks of 8, 32 and 64 lead to the same first verdict of every rule and the same counts.

    The one thing that the cut may change is how long words may have fallen unseen, so the slew ceiling is left out.
    """
    limit = replace(limit, fall_q16=0, deviation=500, deviation_samples=20)
    v, i, _ = series(stretches)
    v, i = [10000] * 64 + v, [10] * 64 + i
    outcomes = []
    for size in (8, 32, 64):
        found, odd = run(limit, cut(v, i, [10000] * len(v), size))
        first: dict[str, int] = {}
        for name, index in found:
            first.setdefault(name, index)
        outcomes.append((first, odd))
    assert outcomes[0] == outcomes[1] == outcomes[2]


@settings(max_examples=40, deadline=None)
@given(stretches=st.lists(stretch, min_size=2, max_size=10), at=st.integers(1, 6))
def test_a_guard_made_from_a_snapshot_goes_on_alike(
        stretches: list[tuple[int, int, int, int, int, int]], at: int) -> None:
    """A replay that starts from a snapshot gives the rest of the verdicts to the bit."""
    blocks = blocks_of(stretches, [16], [0])
    guard = Guard(limits(deviation=500, deviation_samples=20))
    for each in blocks[:at]:
        guard.judge(each)
    twin = Guard.from_snapshot(guard.snapshot())
    assert [guard.judge(each) for each in blocks[at:]] == [twin.judge(each) for each in blocks[at:]]
    assert twin.interfering == guard.interfering
    assert HostRule.OPERATOR not in guard.interfering
