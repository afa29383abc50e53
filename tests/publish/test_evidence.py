"""The picture of an arc's or trip's snapshot: bounded, no peak lost, the trigger at zero."""

from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hvhost.bench.file import load_bench
from hvhost.publish.evidence import evidence_view
from hvhost.publish.snapshot import EVIDENCE_KEPT
from hvhost.supervisor.evidence import Snapshot as Evidence

BENCH = load_bench(Path(__file__).resolve().parents[2] / "configs" / "demo.bench.yaml")
VOLTS, AMPS = BENCH.voltage.monitor, BENCH.current.monitor
CODES = st.integers(0, 30_000)


def evidence(codes: list[int], trigger: int) -> Evidence:
    """A snapshot of these interleaved codes."""
    return Evidence(number=4, kind="trip", tag=1, total=len(codes) // 2, trigger=trigger, index=0, lost=1,
                    codes=tuple(codes))


@given(st.lists(st.tuples(CODES, CODES), min_size=1, max_size=900), st.data())
@settings(max_examples=40)
def test_it_is_bounded_and_no_peak_is_lost(pairs: list[tuple[int, int]], data: st.DataObject) -> None:
    """At most so many points, in order, with the snapshot's own extremes (to the millivolt)."""
    trigger = data.draw(st.integers(0, len(pairs) - 1))
    view = evidence_view(evidence([code for pair in pairs for code in pair], trigger), BENCH, 1e-3)
    assert len(view.points) <= EVIDENCE_KEPT
    assert max(one.v_max for one in view.points) == pytest.approx(max(VOLTS.value(v) for v, _ in pairs), abs=1e-3)
    assert max(one.i_max for one in view.points) == pytest.approx(max(AMPS.value(i) for _, i in pairs), abs=1e-9)
    times = [one.t_s for one in view.points]
    assert times == sorted(times)
    assert 0.0 in times


def test_the_trigger_is_zero_and_the_spans_are_the_converters() -> None:
    """64 pairs before and 64 after at 1 kHz: from -63 ms to 64 ms, one bucket two pairs long."""
    pairs = [(20_000, 100)] * 64 + [(400, 3000)] * 64
    view = evidence_view(evidence([code for pair in pairs for code in pair], 63), BENCH, 1e-3, "breakdown")
    assert (view.kind, view.number, view.text, view.lost) == ("trip", 4, "breakdown", True)
    assert view.span_s == pytest.approx(2e-3)
    assert view.points[0].t_s == pytest.approx(-62e-3)
    assert view.points[-1].t_s == pytest.approx(64e-3)
    before = [one for one in view.points if one.t_s <= 0.0]
    assert min(one.v_min for one in before) == pytest.approx(VOLTS.value(20_000), abs=1e-3)
