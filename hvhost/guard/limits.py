"""The one table of limits that the rules compare with: integers in oriented codes and samples, frozen.

Codes are monitor codes above zero (positive in the bench's polarity); words are set-point codes.  ``*_q16`` are
ratios times 65536.  Zero switches a rule off where its comment says so.
"""

from dataclasses import dataclass


@dataclass(frozen=True, slots=True, kw_only=True)
class GuardLimits:
    """Every limit of every rule, for one step of one run."""

    # the chain
    tick_hz: int
    sample_ticks: int
    v_map_q16: int  # oriented voltage monitor codes per voltage word code
    i_map_q16: int  # oriented current monitor codes per current word code
    v_limits: tuple[int, int]  # oriented codes at which the voltage converter clips, low and high
    i_limits: tuple[int, int]
    delay_samples: int  # programming delay: the readback follows the words within this
    fall_q16: int  # most that the words may fall in one sample, in monitor codes (slew ceiling or down-slew)
    drain_q16: int  # voltage codes per sample that one code of load current can take from output and cable
    # the rules
    persist: int = 2  # consecutive samples that an amplitude rule needs; fewer are counted as interference
    overcurrent: int  # code; above it trips
    level: int = 0  # code; above it for level_samples trips; 0 is off
    level_samples: int = 1
    overvoltage: int  # code; above it trips
    drop: int  # codes; collapse: an unexplained fall of more than this (D)
    drop_samples: int  # over this many samples (w)
    zero_band: int  # codes; a readback within this of zero counts as zero, below minus this it is reversed
    i_band: int  # the same for the current readback
    deviation: int = 0  # codes between readback and set-point at rest; 0 is off
    deviation_samples: int = 1  # for this long
    follow_word: int = 0  # word change from which a ramp is watched at its start; 0 is off
    follow_q16: int = 0  # least share of the set-point's rise that the readback must show
    saturated_samples: int  # a code at the converter's limit for this long is saturated
    stuck_samples: int  # readback without any change while the set-point moved or noise is due, for this long
    missing_word: int  # set-point (word) from which a readback at zero is missing
    missing_samples: int
    stale_ms: int  # no block for this long is a stale stream
    contacts: int  # Inputs that must be closed while power may be on
    energy_j_max: float = 0.0  # arc energy per step; 0 is off
    # what the texts need
    v_per_code: float
    a_per_code: float
