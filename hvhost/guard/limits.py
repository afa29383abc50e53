"""The one table of limits that the rules compare with: integers in oriented codes and samples, frozen.

Codes are monitor codes above zero (positive in the bench's polarity); words are set-point codes.  ``*_q16`` are
ratios times 65536.  Zero switches a rule off only where its comment says so.
"""

from dataclasses import dataclass

from hvhost.words.errors import CommandRefused


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
    fall_q16: int  # most that the words may fall in one sample, in voltage monitor codes
    drain_q16: int  # voltage codes per sample that one code of load current can take from output and cable
    # amplitudes
    persist: int = 2  # consecutive samples that an amplitude rule needs; fewer are counted as interfering
    overcurrent: int  # code; above it trips
    level: int = 0  # code; above it for level_samples trips; 0 is off
    level_samples: int = 1
    overvoltage: int  # code; above it trips
    # collapse
    drop: int  # codes; an unexplained fall of more than this (D)
    drop_samples: int  # over this many samples (w)
    # plausibility
    zero_band: int  # codes; a readback within this of zero counts as zero, below minus this it is reversed
    i_band: int  # the same for the current readback
    deviation: int = 0  # codes between readback and set-point at rest; 0 is off
    deviation_samples: int = 1  # for this long
    follow_word: int = 0  # rise of the voltage word after which a ramp's readback is checked once; 0 is off
    follow_q16: int = 0  # least share of the set-point's rise that the readback must show then
    saturated_samples: int  # a code at the converter's limit for this long is saturated
    stuck_samples: int = 0  # voltage readback without the least change for this long; 0 is off
    missing_word: int  # voltage word from which a readback at zero, or without change, is missing
    missing_samples: int  # for this long
    # the stream and the contacts
    gap_samples: int  # missing pairs that trip; fewer are an event
    stale_ms: int  # no block for this long is a stale stream
    contacts: int  # Inputs that must be closed while power may be on
    # energy into arcs, in v_code x i_code x samples
    step: int = 0  # a new number starts a new sum
    arc_energy: int = 0  # 0 is off
    stored_q16: int = 0  # energy that one (v_code)^2 of fall takes from output and cable
    # what the texts need
    v_per_code: float
    a_per_code: float

    def __post_init__(self) -> None:
        if not 1 <= self.persist <= 4:
            raise CommandRefused("persist from 1 to 4 samples", str(self.persist), "guard limits")
        for name in ("tick_hz", "sample_ticks", "overcurrent", "overvoltage", "drop", "drop_samples", "level_samples",
                     "deviation_samples", "saturated_samples", "missing_samples", "gap_samples", "stale_ms"):
            if getattr(self, name) < 1:
                raise CommandRefused("a limit above zero", f"{name} = {getattr(self, name)}", "guard limits")

    @property
    def sample_s(self) -> float:
        """Seconds between two samples."""
        return self.sample_ticks / self.tick_hz

    def volts(self, code: int) -> str:
        """Return a voltage code as text."""
        return f"{code * self.v_per_code / 1e3:.3f} kV"

    def milliamps(self, code: int) -> str:
        """Return a current code as text."""
        return f"{code * self.a_per_code * 1e3:.4g} mA"

    def seconds(self, samples: int) -> str:
        """Return a number of samples as text."""
        return f"{samples * self.sample_s:.3g} s"
