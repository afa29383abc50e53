"""Calibrated blocks: volts and amps as arrays, with the pairs that no tare, mean or fit may use."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from hvhost.bench.model import Bench
from hvhost.samples.blocks import Orientation, SampleBlock


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class CalibratedBlock:
    """One sample block in SI units: arrays of ``pairs`` values, oriented (positive in the bench's polarity).

    ``excluded_v`` and ``excluded_i`` are true where a code stood at its converter's limit: it says only that the value
    lies beyond.
    """

    index: int
    tick: int
    sample_ticks: int
    volts: NDArray[np.float64]
    amps: NDArray[np.float64]
    excluded_v: NDArray[np.bool_]
    excluded_i: NDArray[np.bool_]

    @property
    def excluded(self) -> NDArray[np.bool_]:
        """True where either code of the pair is excluded."""
        return self.excluded_v | self.excluded_i

    @property
    def ticks(self) -> NDArray[np.int64]:
        """The tick of every pair."""
        return self.tick + self.sample_ticks * np.arange(len(self.volts), dtype=np.int64)


def calibrated(block: SampleBlock, bench: Bench, orientation: Orientation) -> CalibratedBlock:
    """Return the block in SI units: ``value = gain * (raw - zero)`` of the bench's calibration."""
    v_low, v_high, _, _ = orientation.raw_bounds(voltage=True)
    i_low, i_high, _, _ = orientation.raw_bounds(voltage=False)
    codes = np.array(block.raw.codes, dtype=np.int64).reshape(-1, 2)
    v, i = codes[:, 0], codes[:, 1]
    return CalibratedBlock(
        index=block.index, tick=block.tick, sample_ticks=block.sample_ticks, volts=bench.voltage.monitor.values(v),
        amps=bench.current.monitor.values(i), excluded_v=(v <= v_low) | (v >= v_high),
        excluded_i=(i <= i_low) | (i >= i_high))
