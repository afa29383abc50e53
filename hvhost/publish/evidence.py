"""The MCU's snapshot of an arc or a trip as a picture: raw codes to volts and amps, at most so many extremes."""

from hvhost.bench.model import Bench
from hvhost.publish.snapshot import EVIDENCE_KEPT, EvidenceView, TrendBucket
from hvhost.supervisor.evidence import Snapshot as Evidence


def evidence_view(evidence: Evidence, bench: Bench, pair_s: float, text: str = "") -> EvidenceView:
    """Return the picture of one snapshot; ``pair_s`` is the time from one pair to the next.

    Each point is the extremes of as many pairs as make at most ``EVIDENCE_KEPT`` points; its time is that of its last
    pair, counted from the trigger.  The trigger's pair ends a point, so that what came before it stays before it.
    """
    volts = [bench.voltage.monitor.value(code) for code in evidence.codes[0::2]]
    amps = [bench.current.monitor.value(code) for code in evidence.codes[1::2]]
    pairs = min(len(volts), len(amps))
    each = max(1, -(-pairs // (EVIDENCE_KEPT - 1)))  # one point more may come from beginning anew behind the trigger
    points = []
    first = 0
    while first < pairs:
        end = min(first + each, pairs)
        if first <= evidence.trigger < end:
            end = evidence.trigger + 1
        points.append(TrendBucket(
            round((end - 1 - evidence.trigger) * pair_s, 6), round(min(volts[first:end]), 3),
            round(max(volts[first:end]), 3), round(min(amps[first:end]), 9), round(max(amps[first:end]), 9)))
        first = end
    return EvidenceView(kind=evidence.kind, number=evidence.number, text=text, span_s=each * pair_s,
                        points=tuple(points[-EVIDENCE_KEPT:]), lost=bool(evidence.lost))
