"""Many payloads at once."""

import random

import pytest

from hvhost.record.entries import EntryKind
from hvhost.record.layout import HEAD, PACKED, EntryPacker
from hvhost.record.pack import pack_payload
from hvhost.record.spans import Span, decode_spans
from hvhost.wire.frames import Block


@pytest.mark.parametrize("signs", ["ss", "uu", "us", "su"])
@pytest.mark.parametrize("at_rest", [False, True])
def test_any_mixture_of_lengths_widths_and_signs_is_decoded(signs: str, at_rest: bool) -> None:
    """Blocks of different sizes and bit widths come back in file order, each with its own codes."""
    draw = random.Random(3)
    low = {"s": -32768, "u": 0}
    data, spans, expected = b"", [], []
    for k in range(300):
        v_spread, i_spread = draw.choice((1, 5, 300, 32000)), draw.choice((1, 9, 32000))
        codes = []
        for _ in range(draw.choice((1, 7, 32, 64))):
            codes += [low[signs[0]] + draw.randrange(v_spread), low[signs[1]] + draw.randrange(i_spread)]
        block = Block(k, k, 1, 2, 3, 0, 5, draw.choice((0, 70_000)), 7, 8, tuple(codes))
        entry = EntryPacker(0, signs).pack_block(float(k), block)
        flags, payload = entry[3], entry[HEAD.size : -4]
        if at_rest:
            flags, payload = pack_payload(EntryKind.BLOCK, flags, payload)
        spans.append(Span(flags, len(data), len(data) + len(payload)))
        data += payload
        expected.append(block)
    assert not at_rest or any(s.flags & PACKED for s in spans)
    found = decode_spans(data, spans)
    for k, block in enumerate(expected):
        rows = slice(found.first[k], found.first[k + 1])
        assert tuple(found.v[rows].tolist()) == block.codes[0::2]
        assert tuple(found.i[rows].tolist()) == block.codes[1::2]
        assert (found.head["index"][k], found.head["missed"][k], found.head["pairs"][k]) == (k, block.missed,
                                                                                           block.pairs)


def test_no_block_at_all_gives_empty_arrays() -> None:
    """A file without blocks decodes to nothing."""
    found = decode_spans(b"", [])
    assert (len(found.head), len(found.v), found.first.tolist()) == (0, 0, [0])


def test_a_payload_that_does_not_fit_is_refused() -> None:
    """A size that its pairs do not explain raises instead of reading beside."""
    entry = EntryPacker(0, "uu").pack_block(1.0, Block(0, 0, 0, 0, 0, 0, 0, 0, 0, 0, (1, 2, 3, 4)))
    with pytest.raises(ValueError, match="size does not fit"):
        decode_spans(entry[HEAD.size :], [Span(entry[3], 0, len(entry) - HEAD.size - 8)])
