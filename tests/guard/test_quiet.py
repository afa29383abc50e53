"""The look that spares rules changes nothing: verdicts and memories are those of a guard that asks every rule."""

from dataclasses import replace

from hypothesis import given, settings
from hypothesis import strategies as st

from hvhost.guard.guard import Guard
from hvhost.guard.limits import GuardLimits
from hvhost.guard.quiet import ASKED, AT_REST, at_rest, band_of, quiet
from hvhost.guard.rules import LIVE, RULES, SLOT
from hvhost.guard.view import View
from hvhost.samples.blocks import Flags, SampleBlock
from hvhost.wire.vocabulary import HostRule, McuState
from tests.guard.build import CLOSED, NONE, block, limits

VOLTS = [-51, 50, 51, 21000, 21001, 32767]
AMPS = [-51, -50, 2000, 2001, 3001, 32767]
CALM = (10000, 100, 1)
# one thing is odd about an odd block, so that each way of not being quiet is tried by itself
odd = st.one_of(
    *[st.tuples(st.sampled_from(VOLTS).map(lambda v: (v, 100, 0)), st.just(CLOSED), st.just(0), st.just(NONE))] * 3,
    *[st.tuples(st.sampled_from(AMPS).map(lambda i: (10000, i, 0)), st.just(CLOSED), st.just(0), st.just(NONE))] * 3,
    st.tuples(st.just(CALM), st.sampled_from([0, CLOSED & ~1, CLOSED & ~4]), st.just(0), st.just(NONE)),
    st.tuples(st.just(CALM), st.just(CLOSED), st.sampled_from([1, 200]), st.just(NONE)),
    st.tuples(st.just(CALM), st.just(CLOSED), st.just(0), st.sampled_from([Flags.STALE, Flags.LIMIT_V])))
calm = st.just((CALM, CLOSED, 0, NONE))
STATES = [*[McuState.ENERGISED] * 12, McuState.OFF, McuState.WARNING, McuState.PAUSING, McuState.LOWERING]
Part = tuple[tuple[tuple[int, int, int], int, int, Flags], int, McuState, int]
given_blocks = st.lists(st.tuples(st.one_of(calm, odd), st.integers(1, 6), st.sampled_from(STATES),
                                  st.sampled_from([10000, 10000, 10000, 999])), min_size=3, max_size=14)
given_limits = st.builds(
    limits, persist=st.sampled_from([1, 1, 2, 3]), drop_samples=st.integers(1, 8), level=st.sampled_from([0, 2000]),
    level_samples=st.integers(1, 3), stuck_samples=st.sampled_from([0, 5]), saturated_samples=st.integers(1, 3),
    missing_samples=st.integers(1, 3), deviation=st.sampled_from([0, 400]), deviation_samples=st.integers(1, 20),
    arc_wait=st.booleans(), arc_energy=st.sampled_from([0, 10**6]), follow_word=st.sampled_from([0, 500]),
    follow_q16=st.just(30000))


class Asking(Guard):
    """A guard that always asks every rule."""

    __slots__ = ()

    def judge(self, block: SampleBlock) -> "tuple[object, ...]":  # type: ignore[override]
        """Forget that nothing was going on."""
        self._resting = False
        return super().judge(block)


def made(parts: list[Part]) -> list[SampleBlock]:
    """Blocks of up to seven samples: calm ones around the odd one, which stands at a place of its own."""
    out, index = [], 0
    for ((level, current, noise), inputs, gap, flags), size, state, word in parts:
        v = [10000 + k % 2 for k in range(size)] + [level + noise]
        i = [100] * size + [current]
        index += gap
        out.append(block(index, v[size % 2:], i[size % 2:], v_word=word, state=state, inputs=inputs, gap=gap,
                         flags=flags))
        index += len(v[size % 2:])
    return out


@settings(max_examples=400, deadline=None)
@given(limit=given_limits, other=given_limits, parts=given_blocks, change=st.integers(0, 13))
def test_a_guard_that_spares_rules_judges_as_one_that_asks_them_all(
        limit: GuardLimits, other: GuardLimits, parts: list[Part], change: int) -> None:
    """Through changes of state and of limits: the same verdicts, the same memories."""
    sparing, asking = Guard(limit), Asking(limit)
    for at, each in enumerate(made(parts)):
        if at == change:
            for guard in (sparing, asking):
                guard.with_limits(replace(other, step=limit.step + 1))
        assert sparing.judge(each) == asking.judge(each)
    assert sparing.snapshot().memories == asking.snapshot().memories
    assert sparing.snapshot().fallen == asking.snapshot().fallen


def test_on_a_quiet_block_only_what_follows_the_samples_is_asked() -> None:
    """Three rules count or compare with the set-point on every block; the other thirteen are spared."""
    energised = int(McuState.ENERGISED)
    assert {RULES[at].number for at, _ in ASKED[energised]} == {
        HostRule.STUCK, HostRule.DEVIATION, HostRule.NOT_FOLLOWING}
    assert len(LIVE[energised]) == len(AT_REST) + 3


def test_a_block_at_the_ends_of_the_band_is_quiet_and_one_code_beyond_is_not() -> None:
    """Both ends belong to it; a gap, an open contact or lateness takes it out."""
    band = band_of(limits(level=2000))

    def look(v: int, i: int, **changes: object) -> bool:
        each = block(0, [v, 10000], [i, 100], **changes)  # type: ignore[arg-type]
        return quiet(View(each, McuState.ENERGISED, ()), band)

    assert all(look(v, i) for v in (51, 21000) for i in (-50, 2000))
    assert not any((look(50, 0), look(21001, 0), look(51, -51), look(51, 2001)))
    assert not any((look(51, 0, gap=1), look(51, 0, inputs=0), look(51, 0, flags=Flags.STALE)))


def test_a_memory_of_something_going_on_asks_every_rule() -> None:
    """Fresh memories are at rest; one excursion is not."""
    fresh = [rule.fresh for rule in RULES]
    assert at_rest(fresh)
    fresh[SLOT[HostRule.OVERVOLTAGE]] = fresh[SLOT[HostRule.OVERVOLTAGE]]._replace(length=1)
    assert not at_rest(fresh)
