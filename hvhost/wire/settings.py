"""The MCU's settings: one table of integer keys with ranges, their checksum, and what 'tighter' means for each.

All values are codes, ticks, samples or plain numbers; volts and amps live on the host.  A block of settings is a
tuple of integers in the order of ``SETTINGS``.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from zlib import crc32

from hvhost.words.errors import WireFault

PAGE = 8  # settings per answer to `get`


@dataclass(frozen=True, slots=True)
class Setting:
    """One key: its range, its unit and what it means; ``arm`` names the way an arm may tighten it."""

    key: str
    low: int
    high: int
    unit: str
    meaning: str
    arm: str = ""  # "", "lower" (an arm may give a smaller value) or "higher"


I16, U16, U32 = 32767, 65535, 0xFFFFFFFF

SETTINGS: tuple[Setting, ...] = (
    Setting("vmax", 0, U16, "code", "ceiling of the voltage word", "lower"),
    Setting("imax", 0, U16, "code", "ceiling of the current word", "lower"),
    Setting("vslew", 1, U32, "code/s", "steepest rise or fall of the voltage word in a segment", "lower"),
    Setting("islew", 1, U32, "code/s", "steepest rise or fall of the current word in a segment", "lower"),
    Setting("vfull", 1, 1_000_000, "V", "nominal volts at the voltage word's full scale"),
    Setting("ifull", 1, 1_000_000_000, "µA", "nominal microamps at the current word's full scale"),
    Setting("polarity", -1, 1, "sign", "polarity of the output: 1 or -1"),
    Setting("vmap", -(1 << 24), 1 << 24, "1/65536", "voltage monitor codes per voltage word code"),
    Setting("vzero", -U16, U16, "code", "voltage monitor code at zero volts"),
    Setting("imap", -(1 << 24), 1 << 24, "1/65536", "current monitor codes per current word code"),
    Setting("izero", -U16, U16, "code", "current monitor code at zero amps"),
    Setting("downslew", 1, U32, "code/s", "down-slew of the voltage word in a lower"),
    Setting("lowermax", 1, 60_000, "ms", "longest lower before the cut"),
    Setting("warn", 3_000, 60_000, "ms", "warning before energising, danger signal lit"),
    Setting("bleed", 1, 3_600_000, "ms", "bleed time: time constant of the discharge with the supply off"),
    Setting("bleeds", 1, 100, "", "bleed times to wait where the voltage cannot be measured"),
    Setting("zeroband", 1, U16, "code", "readback within this of its zero counts as zero"),
    Setting("longest", 1, 10_000_000, "s", "longest time on"),
    Setting("leasemin", 100, 2_000, "ms", "shortest lease a session may ask for"),
    Setting("leasemax", 100, 2_000, "ms", "longest lease a session may ask for"),
    Setting("oc", 1, U16, "code", "absolute overcurrent, monitor codes above zero", "lower"),
    Setting("ocl", 1, U16, "code", "overcurrent level, monitor codes above zero", "lower"),
    Setting("oclms", 1, 3_600_000, "ms", "time above the overcurrent level that trips", "lower"),
    Setting("ov", 1, U16, "code", "absolute overvoltage, monitor codes above zero", "lower"),
    Setting("env", 1, U16, "code", "margin of the decaying envelope", "lower"),
    Setting("drop", 1, U16, "code", "collapse: unexplained fall that counts (D)", "lower"),
    Setting("span", 1, 64, "samples", "collapse: samples over which the fall is taken (w)"),
    Setting("delay", 0, 64, "samples", "programming delay before the readback follows the words"),
    Setting("persist", 1, 4, "samples", "consecutive samples that a fast rule needs (n)", "lower"),
    Setting("missms", 1, 60_000, "ms", "readback stuck or at the converter's limit for this long is missing", "lower"),
    Setting("arccount", 0, 10_000, "", "most arcs in a window that may pause; 0 forbids pausing"),
    Setting("arcrest", 1, 3_600_000, "ms", "shortest rest after an arc"),
    Setting("arcwindow", 1, 36_000_000, "ms", "shortest window in which arcs are counted"),
    Setting("arctotal", 0, 100_000, "", "most arcs per arm that may pause"),
    Setting("restrike", 1, 1_000, "ms", "collapses this soon after an arc belong to it"),
    Setting("fitted", 0, U32, "mask", "outputs, read-backs and inputs that exist (Fitted)"),
)

KEYS: tuple[str, ...] = tuple(s.key for s in SETTINGS)
INDEX: dict[str, int] = {key: at for at, key in enumerate(KEYS)}
BY_KEY: dict[str, Setting] = {s.key: s for s in SETTINGS}
TIGHTENABLE: tuple[str, ...] = tuple(s.key for s in SETTINGS if s.arm)
PAGES = (len(SETTINGS) + PAGE - 1) // PAGE


@dataclass(frozen=True, slots=True)
class Settings:
    """One complete, checked set of values in table order."""

    values: tuple[int, ...]

    def __post_init__(self) -> None:
        if len(self.values) != len(SETTINGS):
            raise WireFault(f"{len(SETTINGS)} settings", str(len(self.values)), "settings")
        for setting, value in zip(SETTINGS, self.values, strict=True):
            if not setting.low <= value <= setting.high:
                raise WireFault(f"{setting.low} to {setting.high} {setting.unit}".rstrip(), str(value),
                                f"setting {setting.key}")
        if self["polarity"] == 0:
            raise WireFault("1 or -1", "0", "setting polarity")
        if self["leasemin"] > self["leasemax"]:
            raise WireFault(f"at most leasemax ({self['leasemax']} ms)", str(self["leasemin"]), "setting leasemin")

    @classmethod
    def of(cls, values: Mapping[str, int]) -> "Settings":
        """Build from a mapping with every key and no other."""
        if set(values) != set(KEYS):
            odd = sorted(set(values) ^ set(KEYS))
            raise WireFault("every setting of the table and no other", ", ".join(odd), "settings")
        return cls(tuple(values[key] for key in KEYS))

    def __getitem__(self, key: str) -> int:
        return self.values[INDEX[key]]

    def with_(self, **changes: int) -> "Settings":
        """Return a copy with some values changed."""
        return Settings.of({**dict(zip(KEYS, self.values, strict=True)), **changes})

    @property
    def checksum(self) -> int:
        """CRC-32 over ``key=value`` lines in table order, each ended by LF."""
        return checksum(self.values)


def checksum(values: tuple[int, ...]) -> int:
    """CRC-32 over ``key=value`` lines in table order, each ended by LF."""
    return crc32(b"".join(b"%s=%d\n" % (key.encode(), value) for key, value in zip(KEYS, values, strict=True)))


def differences(here: Settings, there: Settings) -> tuple[tuple[str, int, int], ...]:
    """Return (key, here, there) for each setting that differs."""
    return tuple((k, a, b) for k, a, b in zip(KEYS, here.values, there.values, strict=True) if a != b)
