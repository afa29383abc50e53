"""Readings for scripts: every sample once, stretches as a plain loop makes them, bounded and counted."""

import json
from base64 import b64decode
from typing import Any

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from hvhost.bench.file import bench_from
from hvhost.publish.readings import ASKING_MOST, Backlog, Figures, Portion, ReadingsFeed, figures_of
from hvhost.samples.blocks import Flags, SampleBlock
from hvhost.supervisor.core import Core
from hvhost.wire.frames import Block
from tests.bench.changes import DEMO

FIGURES = Figures(v_zero=1.0, v_gain=0.5, i_zero=-1e-6, i_gain=1e-7, tick_hz=10_000.0,
                  utc_ns=lambda tick: tick * 100_000)


def block(index: int, codes: list[int], *, gap: int = 0, state: int = 4, flags: int = 0) -> SampleBlock:
    """A block of these voltage codes; the current's are their negatives."""
    raw = Block(index & 0xFFFFFFFF, index * 10 & 0xFFFFFFFF, 0, 0, state, 0, 0, 0, 0, 0, ())
    return SampleBlock(index=index, tick=index * 10, v=tuple(codes), i=tuple(-c for c in codes), v_word=0, i_word=0,
                       state=state, latched=False, inputs=0, missed=0, event=0, arc=0, arrival_s=0.0, gap=gap,
                       flags=Flags(flags), raw=raw, sample_ticks=10)


def lines(backlog: Backlog) -> list[dict[str, Any]]:
    """The parameters of every notification that waits."""
    out = []
    while (line := backlog.take()) is not None:
        message = json.loads(line)
        assert (message["jsonrpc"], message["method"]) == ("2.0", "readings")
        out.append(message["params"])
    return out


def array(text: str) -> np.ndarray:
    """The numbers of an array."""
    return np.frombuffer(b64decode(text), dtype="<f4")


def fed(every: int, blocks: list[SampleBlock], spread_after: int = 1) -> list[dict[str, Any]]:
    """What a client of this stretch gets of these blocks."""
    feed, backlog = ReadingsFeed(lambda: FIGURES), Backlog(every)
    assert feed.add(backlog)
    for at, one in enumerate(blocks, start=1):
        feed.take(one)
        if at % spread_after == 0:
            feed.spread()
    feed.spread()
    return lines(backlog)


def test_every_sample_comes_once_in_volts_and_amps_with_its_time() -> None:
    """Two blocks that follow one another are one portion; codes become SI by the session's figures."""
    (got,) = fed(1, [block(320, [0, 2, 4]), block(323, [6, 8])], spread_after=2)
    assert [got[key] for key in ("index", "tick", "points", "every", "dropped", "missing")] == [320, 3200, 5, 1, 0, 0]
    assert (got["utc_ns"], got["sample_s"], got["state"], got["latched"]) == (320_000_000, 0.001, "energised", False)
    assert array(got["volts"]).tolist() == [1.0, 2.0, 3.0, 4.0, 5.0]
    assert np.allclose(array(got["amps"]), [-1e-6, -1.2e-6, -1.4e-6, -1.6e-6, -1.8e-6])


def test_a_gap_or_another_state_begins_a_new_portion() -> None:
    """Samples of one portion are consecutive and in one state; what was lost before it is said."""
    got = fed(1, [block(0, [1, 2]), block(5, [3, 4], gap=3), block(7, [5], state=6, flags=int(Flags.LIMIT_V))], 3)
    assert [(p["index"], p["points"], p["missing"], p["state"]) for p in got] == [
        (0, 2, 0, "energised"), (5, 2, 3, "energised"), (7, 1, 0, "lowering")]
    assert got[2]["flags"] == ["voltage at converter limit"]


def test_a_stretch_is_held_until_it_is_full() -> None:
    """Stretches end where the index divides by their length; the first may be shorter, the rest waits."""
    got = fed(4, [block(6, [0, 2, 4]), block(9, [6, 8]), block(11, [10, 12, 14])])
    assert [(p["index"], p["points"]) for p in got] == [(6, 1), (8, 1)]
    assert array(got[0]["volts"]).tolist() == [1.5]
    assert [array(got[1][name])[0] for name in ("volts_min", "volts", "volts_max")] == [3.0, 4.5, 6.0]


@given(st.lists(st.tuples(st.integers(1, 40), st.sampled_from([0, 0, 0, 3]), st.sampled_from([4, 4, 4, 6])), min_size=1,
                max_size=12), st.integers(1, 50), st.integers(1, 4), st.integers(0, 1000))
def test_stretches_are_what_a_plain_loop_makes_of_the_samples(
        shapes: list[tuple[int, int, int]], every: int, spread_after: int, first: int) -> None:
    """Slow twin: samples by stretch, each new at a multiple of its length, a gap or another state."""
    blocks, index = [], first
    for pairs, gap, state in shapes:
        index += gap
        blocks.append(block(index, [(7 * k) % 23 for k in range(index, index + pairs)], gap=gap, state=state))
        index += pairs
    wanted: list[tuple[int, list[int]]] = []
    before: SampleBlock | None = None
    for one in blocks:
        fresh = before is None or one.gap or one.state != before.state
        for at, code in enumerate(one.v, start=one.index):
            if fresh or at % every == 0:
                wanted.append((at, []))
                fresh = False
            wanted[-1][1].append(code)
        before = one
    if (wanted[-1][0] + len(wanted[-1][1])) % every:
        wanted.pop()  # not full yet
    got = fed(every, blocks, spread_after)
    begins = [p["index"] if k == 0 else (p["index"] // every + k) * every for p in got for k in range(p["points"])]
    assert begins == [begin for begin, _ in wanted]
    means = [float(v) for p in got for v in array(p["volts"])]
    assert np.allclose(means, [1.0 + 0.5 * sum(codes) / len(codes) for _, codes in wanted], rtol=1e-6)
    if every > 1:
        highest = [float(v) for p in got for v in array(p["volts_max"])]
        assert highest == [1.0 + 0.5 * max(codes) for _, codes in wanted]
        lowest = [float(v) for p in got for v in array(p["amps_min"])]
        assert np.allclose(lowest, [-1e-6 - 1e-7 * max(codes) for _, codes in wanted], rtol=1e-6)


def test_a_long_portion_is_cut_into_lines_of_bounded_length() -> None:
    """No line is longer than a client may read at once."""
    got = fed(1, [block(32 * k, list(range(32))) for k in range(300)], spread_after=300)
    assert [p["points"] for p in got] == [4096, 4096, 1408]
    assert [p["index"] for p in got] == [0, 4096, 8192]


def test_a_backlog_that_is_not_read_loses_its_oldest_and_says_so() -> None:
    """Memory is bounded; each line carries how many samples its client was not sent so far."""
    backlog = Backlog(1, limit=100)
    gone = sum(backlog.put(Portion(b'"n":%d' % n + b" " * 35, 32)) for n in range(10))
    assert gone == 8
    assert backlog.waiting_bytes <= 100
    first, second = lines(backlog)
    assert (first["n"], first["dropped"], second["n"], second["dropped"]) == (8, 256, 9, 256)


def test_blocks_that_come_faster_than_they_are_encoded_go_oldest_first_and_are_counted() -> None:
    """A loop that stalls loses samples for scripts, never memory."""
    feed, backlog = ReadingsFeed(lambda: FIGURES, kept=4), Backlog(1)
    feed.add(backlog)
    for k in range(6):
        feed.take(block(32 * k, [k] * 32))
    assert feed.spread() == 1
    (got,) = lines(backlog)
    assert (got["index"], got["points"], got["dropped"]) == (64, 128, 64)


def test_nobody_asking_costs_nothing_and_different_stretches_are_bounded() -> None:
    """Blocks are kept only while somebody reads; too many different stretches are refused."""
    feed = ReadingsFeed(lambda: FIGURES)
    feed.take(block(0, [1]))
    first = Backlog(1)
    assert feed.add(first)
    feed.spread()
    assert lines(first) == []
    others = [Backlog(every) for every in range(2, ASKING_MOST + 2)]
    assert [feed.add(one) for one in others] == [True] * (ASKING_MOST - 1) + [False]
    assert feed.add(Backlog(2))
    feed.remove(others[0])
    feed.remove(others[0])
    feed.remove(others[1])
    assert feed.add(others[-1])


def test_before_the_greeting_there_are_no_figures() -> None:
    """Without a session nothing can be turned into volts, and nothing is sent."""
    core = Core(bench_from("b.yaml", DEMO), 0.0, lambda: 1)
    assert figures_of(core, lambda now_s: 0) is None
    feed, backlog = ReadingsFeed(lambda: None), Backlog(1)
    feed.add(backlog)
    feed.take(block(0, [1]))
    assert feed.spread() == 0
    assert backlog.take() is None
