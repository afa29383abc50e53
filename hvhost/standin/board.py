"""What a board is to its MCU: how it is clocked, and the few acts by which the MCU touches the plant.

`Board` is all that the MCU can do to the world and all that it can see of it; the plant of this package is one, a
recording being played back is another, a test's fake a third.
"""

from dataclasses import dataclass
from typing import Protocol

from hvhost.words.errors import CommandRefused

FULL_WORD = 0xFFFF  # widest set-point word: 16 bits, unipolar
SIGNS = frozenset({"uu", "ss", "us", "su"})


class Board(Protocol):
    """Outputs, inputs, converters and the passing of time."""

    def advance(self, dt_s: float, v_cmd: float, i_cmd: float) -> None:
        """Let ``dt_s`` seconds pass with these volts at the programming inputs."""

    def drive(self, *, inhibit: bool, clear: bool, relay: bool) -> None:
        """Set the three outputs; True, True, False is what the wiring does without an MCU."""

    def inputs(self) -> int:
        """Return the physical bits of `vocabulary.Inputs` (neither LEASE nor PROVEN)."""

    def sample(self) -> tuple[int, int]:
        """Convert both monitors once: raw voltage and current codes."""


@dataclass(frozen=True, slots=True, kw_only=True)
class McuConfig:
    """What the firmware was built for; none of it can be changed over the wire.

    ``before`` and ``after`` count pairs of a snapshot up to and including its trigger, and behind it.  ``first_tick``
    and ``first_index`` are the counters' values at every boot (a test starts them just below their wrap).
    """

    firmware: str = "standin"
    tick_hz: int = 10_000
    sample_ticks: int = 10
    block_pairs: int = 32
    queue: int = 16
    before: int = 64
    after: int = 64
    signs: str = "ss"
    v_bits: int = 16
    i_bits: int = 16
    v_dac_bits: int = 16
    i_dac_bits: int = 16
    skew_ns: int = 0
    v_volts_per_code: float = 10.0 / FULL_WORD
    i_volts_per_code: float = 10.0 / FULL_WORD
    first_tick: int = 0
    first_index: int = 0

    def __post_init__(self) -> None:
        if self.signs not in SIGNS:
            raise CommandRefused("signs of V and I, each s or u", repr(self.signs), "McuConfig.signs")
        for name, low, high in (("tick_hz", 100, 1_000_000), ("sample_ticks", 1, 10_000), ("block_pairs", 8, 64),
                                ("queue", 1, 1_000), ("before", 1, 10_000), ("after", 1, 10_000),
                                ("v_bits", 8, 16), ("i_bits", 8, 16), ("v_dac_bits", 8, 16), ("i_dac_bits", 8, 16)):
            value = getattr(self, name)
            if not low <= value <= high:
                raise CommandRefused(f"{low} to {high}", str(value), f"McuConfig.{name}")
        if self.tick_hz < 100 * self.sample_ticks:
            raise CommandRefused("at least 100 pairs/s", f"{self.tick_hz / self.sample_ticks:g}", "McuConfig")

    def ticks(self, ms: int) -> int:
        """Return how many ticks last at least ``ms`` milliseconds."""
        return -(-ms * self.tick_hz // 1000)

    def samples(self, ms: int) -> int:
        """Return how many sample periods last at least ``ms`` milliseconds, never fewer than one."""
        return max(1, -(-ms * self.tick_hz // (1000 * self.sample_ticks)))
