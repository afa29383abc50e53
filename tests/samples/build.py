"""Builders for the samples' tests."""

from collections.abc import Sequence
from pathlib import Path

from hvhost.samples.blocks import Orientation
from hvhost.wire.frames import Block

CONFIGS = Path(__file__).parents[2] / "configs"
PLAIN = Orientation(v_sign=1, v_zero=0, i_sign=1, i_zero=0, v_limits=(-32768, 32767), i_limits=(-32768, 32767),
                    v_band=20, i_band=20)


def wire(index: int, codes: Sequence[int] = (100, 10) * 8, *, tick: int | None = None, missed: int = 0) -> Block:
    """A wire block; the tick is ten times the index unless told; both wrap at 2^32."""
    return Block(index % 2**32, (10 * index if tick is None else tick) % 2**32, 500, 600, 4, 1, 15, missed % 2**32, 3,
                 2, tuple(codes))
