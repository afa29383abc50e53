"""The bench as the rest of the program sees it: frozen, checked, in SI units.

Voltages and currents are oriented magnitudes; ``polarity`` is applied by screens, exports and reports only.
"""

from dataclasses import dataclass, replace
from datetime import date
from enum import StrEnum

from hvhost.bench.archive import Archive
from hvhost.bench.broker import Broker
from hvhost.bench.instrument import Instrument
from hvhost.bench.scaling import Calibration, Channel, Scale
from hvhost.bench.service import DEFAULT, Service
from hvhost.wire.settings import Settings
from hvhost.wire.vocabulary import Fitted
from hvhost.words.findings import Finding

__all__ = ["ArcBounds", "Bench", "BenchLimits", "Channel", "CutMeans", "GroundDevice", "Port", "Scale", "SlowChannel",
           "Unattended"]


class GroundDevice(StrEnum):
    """What grounds the output by hand or by drive."""

    NONE = "none"
    STICK = "stick"  # stick with a hook contact: closed while the stick hangs on its hook
    SWITCH = "switch"  # switch with a position contact


class CutMeans(StrEnum):
    """The means by which a cut acts."""

    RELAY = "relay"  # power relay in the supply's mains
    INHIBIT = "inhibit"
    CLEAR = "clear"  # clear input of the converters
    PROGRAMMING = "programming"  # set-point words to zero


@dataclass(frozen=True, slots=True, kw_only=True)
class BenchLimits:
    """The bench's own trip limits: the least sensitive that any run may use."""

    overcurrent_a: float
    overcurrent_level_a: float
    overcurrent_level_s: float
    overvoltage_v: float
    envelope_v: float
    drop_v: float
    drop_samples: int
    delay_samples: int
    persist: int
    missing_s: float
    follow_fraction: float  # in the first 5 % of a ramp the readback is at least this part of the set-point
    deviation_v: float  # readback away from the set-point, steady
    deviation_s: float
    gap_s: float  # missing samples that trip


@dataclass(frozen=True, slots=True, kw_only=True)
class ArcBounds:
    """What an arc reaction may ask for at most (``rest_s`` and ``window_s``: at least)."""

    count: int
    rest_s: float
    window_s: float
    total: int
    restrike_s: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Port:
    """Where the MCU answers."""

    device: str
    baud: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Unattended:
    """What stands in for a person: a contact to notify, fire and over-temperature inputs, and when a reason is due."""

    notify: str
    fire_input: bool
    over_temperature_input: bool
    reason_beyond_s: float


@dataclass(frozen=True, slots=True, kw_only=True)
class SlowChannel:
    """An auxiliary instrument: recorded with its own time and uncertainty, never a cause of a trip."""

    name: str
    kind: str
    address: str
    query: str
    every_s: float
    uncertainty: str  # as its certificate states it: the unit is its own


@dataclass(frozen=True, slots=True, kw_only=True)
class Bench:
    """Everything one bench file describes, plus what checking it found (*reason needed* and *note*)."""

    name: str
    title: str
    attended: bool
    unattended: Unattended | None
    polarity: int
    voltage: Channel
    current: Channel
    rated_v: float
    rated_a: float
    v_max: float
    i_max: float
    slew_v_per_s: float
    slew_a_per_s: float
    down_slew_v_per_s: float
    lower_max_s: float
    warn_s: float
    lease_s: float
    lease_min_s: float
    lease_max_s: float
    bleed_s: float
    bleeds: int
    zero_band_v: float
    longest_on_s: float
    output_f: float
    cable_f: float
    tip_ohm: float
    touch_v: float
    wet: bool
    cut_path: frozenset[str]
    read_backs: frozenset[str]
    fitted: int
    interlock_hardwired: bool
    interlock_latches: bool
    inhibits_when_mcu_absent: bool
    ground: GroundDevice
    discharge_ohm: float
    discharge_j: float
    monitor_powered_after_cut: bool
    monitor_at_specimen: bool
    arm_input: bool
    warm_up_s: float
    limits: BenchLimits
    arcs: ArcBounds
    calibrated: str | None
    calibration_valid_until: date | None
    rate_hz: float
    bandwidth_hz: float
    ripple_hz: float
    ripple_v: float
    port: Port
    runs_folder: str
    slow_channels: tuple[SlowChannel, ...]
    file: str
    text: str
    sha256: str
    findings: tuple[Finding, ...]
    broker: Broker | None = None
    service: Service = DEFAULT
    instrument: Instrument | None = None
    archive: Archive | None = None

    def settings(self) -> Settings:
        """The MCU settings that this bench asks for, in codes."""
        from hvhost.bench.settings_from import settings_of

        return settings_of(self)

    def calibrated_with(self, voltage: Calibration | None = None, current: Calibration | None = None) -> "Bench":
        """The same bench under fitted lines of its monitors; None leaves the bench file's."""
        return replace(self, voltage=self.voltage.monitored(voltage) if voltage else self.voltage,
                       current=self.current.monitored(current) if current else self.current)

    @property
    def programming_only(self) -> bool:
        """True where no means of the cut path can be proven by a read-back: a cut counts as programming to zero only.

        Screens and records then say 'programmed to zero, supply still powered'.
        """
        return not self.cut_path & self.read_backs & {CutMeans.RELAY, CutMeans.INHIBIT}

    @property
    def stored_f(self) -> float:
        """Capacitance of the bench itself: output and cable."""
        return self.output_f + self.cable_f

    def has(self, what: Fitted) -> bool:
        """Whether an output, read-back or input exists."""
        return bool(self.fitted & what)
