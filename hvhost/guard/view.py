"""What a rule sees: one block (or the part of one that was taken in one state) with its extremes and its past.

The extremes are taken once, with `min` and `max`; nearly every block of a quiet run is settled by comparing them, and
only where that fails does a rule walk the samples.
"""

from typing import NamedTuple

from hvhost.samples.blocks import SampleBlock
from hvhost.wire.vocabulary import McuState


class Collapse(NamedTuple):
    """An unexplained fall of the readback that began in this block or is still on.

    ``confirmed_at`` is the position in the block of the sample that completed it, -1 where it was confirmed before;
    ``started`` is the index of its first sample.
    """

    started: int
    last: int  # index of the last sample known to be part of it
    confirmed_at: int
    unexplained: int  # codes, at the sample that confirmed it
    base: int  # code that the readback fell from
    total: int  # energy of all confirmed falls up to here, in v_code x i_code x samples


class View:
    """One block under one state; ``before`` holds the blocks that the collapse rule may look back on, oldest first."""

    __slots__ = ("before", "block", "collapse", "gap", "i", "i_high", "i_low", "index", "state", "v", "v_high", "v_low",
                 "v_word")

    def __init__(self, block: SampleBlock, state: int, before: "tuple[View, ...]") -> None:
        self.block = block
        self.state = state
        self.before = before
        self.index = block.index
        self.gap = block.gap
        self.v_word = block.v_word
        self.v, self.i = block.v, block.i
        self.v_low, self.v_high, self.i_low, self.i_high = block.extremes
        self.collapse: Collapse | None = None

    @property
    def energised(self) -> bool:
        """True in the state in which the words stand at the output."""
        return self.state == McuState.ENERGISED

    @property
    def last_index(self) -> int:
        """Index of the last sample."""
        return self.index + len(self.v) - 1

    def tick(self, at: int) -> int:
        """Return the tick of the sample at this position."""
        return self.block.tick + at * self.block.sample_ticks
