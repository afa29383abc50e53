"""The bench file as it is written: one model per block of keys, units at the edges, nothing derived.

The order here is the order of the examples.  Which combinations are refused stands in ``checks``; the frozen result
that the program works with is ``model.Bench``.  Uncertainties are typed as a certificate states them: expanded, 95 %,
k = 2.
"""

from enum import StrEnum
from typing import Annotated

from pydantic import Field

from hvhost.bench.archive import ArchiveBlock
from hvhost.bench.broker import MqttBlock
from hvhost.bench.instrument import InstrumentBlock
from hvhost.bench.model import CutMeans, GroundDevice
from hvhost.bench.service import DaemonBlock
from hvhost.words.fields import (
    Amps,
    AmpsOrZero,
    AmpsPerSecond,
    Block,
    Day,
    Farads,
    FaradsOrZero,
    Fraction,
    Hertz,
    Joules,
    Line,
    Ohms,
    Seconds,
    SecondsOrZero,
    Token,
    Volts,
    VoltsOrZero,
    VoltsPerSecond,
    YesNo,
    matching,
    quantity,
    schema_of,
    whole,
    word_of,
)
from hvhost.words.quantities import Dimension


class Polarity(StrEnum):
    """Sign of a voltage against ground."""

    POSITIVE = "positive"
    NEGATIVE = "negative"


class MeasuredAt(StrEnum):
    """Where the voltage monitor measures."""

    SUPPLY = "supply"
    SPECIMEN = "specimen"


class FedFrom(StrEnum):
    """What feeds the red danger signal."""

    POWER_CONTACT = "power contact"  # the supply's power contact, behind relay and interlock
    OTHER = "other"


class SlowKind(StrEnum):
    """What an auxiliary instrument measures."""

    CURRENT = "current"
    TEMPERATURE = "temperature"
    HUMIDITY = "relative humidity"
    PRESSURE = "pressure"


class PortBlock(Block):
    """Where the MCU answers: a serial device, or host and port of a serial server."""

    device: Annotated[str, *matching(r"/[!-~]{1,199}|COM[0-9]{1,3}|tcp://[A-Za-z0-9.:\[\]-]{1,150}:[0-9]{1,5}",
                                     "a serial device such as '/dev/ttyACM0', or 'tcp://host:port'")]
    baud: Annotated[int, *whole(9_600, 4_000_000)] = 1_000_000


class RunsBlock(Block):
    """Where the run folders go; a relative path counts from the bench file's folder."""

    folder: Line


class UnattendedBlock(Block):
    """What stands in for a person where ``attended: no``."""

    notify: Line
    fire_input: YesNo
    over_temperature_input: YesNo
    reason_beyond: Seconds


class SupplyBlock(Block):
    """The supply as its data sheet gives it."""

    voltage: Volts
    current: Amps
    polarity: Annotated[Polarity, *word_of(Polarity)]
    output_capacitance: Farads
    ripple: VoltsOrZero
    ripple_frequency: Hertz
    programming_delay: SecondsOrZero
    warm_up: SecondsOrZero = 0.0


class CableBlock(Block):
    """The cable to the specimen and the resistor at its tip."""

    capacitance: FaradsOrZero
    resistor: Ohms | None = None


class CeilingsBlock(Block):
    """What no plan may exceed; the MCU holds the same in its own memory."""

    voltage: Volts
    current: Amps
    slew: VoltsPerSecond
    current_slew: AmpsPerSecond
    longest_on: Annotated[float, quantity(Dimension.SECOND, low=1.0, high=1e7), schema_of(Dimension.SECOND)]


def _seconds(low: float, high: float) -> tuple[object, object]:
    return quantity(Dimension.SECOND, low=low, high=high), schema_of(Dimension.SECOND)


LeaseTime = Annotated[float, *_seconds(0.1, 2.0)]


class LowerBlock(Block):
    """The MCU's own ramp to zero."""

    slew: VoltsPerSecond
    longest: Annotated[float, *_seconds(0.001, 60.0)] = 10.0


class LeaseBlock(Block):
    """How long the MCU goes on without a judged sample; the bounds it accepts."""

    time: LeaseTime = 0.5
    shortest: LeaseTime = 0.1
    longest: LeaseTime = 2.0


class ProgramBlock(Block):
    """A programming converter and input: ``input`` volts at the supply's input ask for ``full_scale``.

    ``converter`` is the converter's voltage at ``converter_code`` (default: its last code).
    """

    bits: Annotated[int, *whole(8, 16)]
    converter: Volts
    converter_code: Annotated[int, *whole(1, 65_536)] | None = None
    input: Volts
    gain_uncertainty: Fraction


class VoltageProgramBlock(ProgramBlock):
    """Programming of the voltage."""

    full_scale: Volts
    zero_uncertainty: VoltsOrZero


class CurrentProgramBlock(ProgramBlock):
    """Programming of the current limit."""

    full_scale: Amps
    zero_uncertainty: AmpsOrZero


class MonitorBlock(Block):
    """A monitor and its converter: ``output`` volts of the monitor stand for ``full_scale``.

    ``sign`` is that of the monitor's voltage while the output is on; ``zero_code`` the raw code with no output;
    ``converter`` the converter's voltage at ``converter_code`` above zero (default: its last code).
    """

    bits: Annotated[int, *whole(8, 16)]
    signed: YesNo
    converter: Volts
    converter_code: Annotated[int, *whole(1, 65_536)] | None = None
    output: Volts
    sign: Annotated[Polarity, *word_of(Polarity)]
    zero_code: Annotated[float, quantity(Dimension.NUMBER, low=-65_535, high=65_535),
                         schema_of(Dimension.NUMBER)] = 0.0
    gain_uncertainty: Fraction


class VoltageMonitorBlock(MonitorBlock):
    """Monitor of the voltage, and what becomes of it after a cut."""

    full_scale: Volts
    zero_uncertainty: VoltsOrZero
    measured_at: Annotated[MeasuredAt, *word_of(MeasuredAt)]
    powered_after_cut: YesNo


class CurrentMonitorBlock(MonitorBlock):
    """Monitor of the current in the return."""

    full_scale: Amps
    zero_uncertainty: AmpsOrZero


class VoltageBlock(Block):
    """Both directions of the voltage channel."""

    program: VoltageProgramBlock
    monitor: VoltageMonitorBlock


class CurrentBlock(Block):
    """Both directions of the current channel."""

    program: CurrentProgramBlock
    monitor: CurrentMonitorBlock


class SamplingBlock(Block):
    """Sample pairs per second, and the measuring chain's bandwidth (-3 dB)."""

    rate: Annotated[float, quantity(Dimension.HERTZ, low=100.0, high=50_000.0), schema_of(Dimension.HERTZ)]
    bandwidth: Hertz


class CalibrationBlock(Block):
    """The certificate that the scaling and its uncertainties come from."""

    certificate: Line
    valid_until: Day


class CutPathBlock(Block):
    """The means by which a cut acts, which of them are read back, and what the wiring does without the MCU."""

    means: tuple[Annotated[CutMeans, *word_of(CutMeans)], ...]
    read_back: tuple[Annotated[CutMeans, *word_of(CutMeans)], ...] = ()
    inhibits_without_mcu: YesNo


class InterlockBlock(Block):
    """The interlock loop and the emergency switching off (S0)."""

    hard_wired: YesNo
    latches_open: YesNo
    emergency_hard_wired: YesNo
    emergency_input: YesNo


class DangerSignalBlock(Block):
    """The red danger signal."""

    fed_from: Annotated[FedFrom, *word_of(FedFrom)]
    input: YesNo
    dark_with_relay_open: YesNo


class InputsBlock(Block):
    """Further contacts that the MCU reads."""

    auxiliary_supplies: YesNo
    arm: YesNo
    polarity: YesNo


class GroundBlock(Block):
    """The grounding device, its resistor and the energy that the resistor may take at once."""

    device: Annotated[GroundDevice, *word_of(GroundDevice)]
    resistor: Ohms | None = None
    energy: Joules | None = None


class BleedBlock(Block):
    """How the output discharges by itself: time constant with the largest load, and how many of them to wait."""

    time: Annotated[float, *_seconds(0.001, 3600.0)]
    times: Annotated[int, *whole(1, 100)]
    resistance: Ohms | None = None
    zero_band: Volts


class TouchBlock(Block):
    """The touch threshold: 60 V d.c., 35 V where wet (IEC 61010-1 6.3.1)."""

    threshold: Volts
    wet: YesNo = False


class LimitsBlock(Block):
    """The bench's trip limits: the least sensitive that any run may use."""

    overcurrent: Amps
    overcurrent_level: Amps
    overcurrent_time: Annotated[float, *_seconds(0.001, 3600.0)]
    overvoltage: Volts
    envelope: Volts
    collapse: Volts
    collapse_samples: Annotated[int, *whole(1, 64)]
    persistence: Annotated[int, *whole(1, 4)] = 2
    missing_after: Annotated[float, *_seconds(0.001, 60.0)]
    follow: Fraction
    deviation: Volts
    deviation_time: Seconds
    gap: Seconds


class ArcsBlock(Block):
    """The most that a plan may ask of an arc reaction; ``count: 0`` forbids pausing."""

    count: Annotated[int, *whole(0, 10_000)]
    rest: Annotated[float, *_seconds(0.001, 3600.0)]
    window: Annotated[float, *_seconds(0.001, 36_000.0)]
    total: Annotated[int, *whole(0, 100_000)]
    restrike: Annotated[float, *_seconds(0.001, 1.0)] = 0.02


class SlowChannelBlock(Block):
    """An auxiliary instrument that answers a query in text; never a cause of a trip."""

    name: Token
    kind: Annotated[SlowKind, *word_of(SlowKind)]
    address: Annotated[str, *matching(r"/[!-~]{1,199}|COM[0-9]{1,3}|tcp://[A-Za-z0-9.:\[\]-]{1,150}:[0-9]{1,5}",
                                      "a serial device such as '/dev/ttyUSB0', or 'tcp://host:port'")]
    query: Line
    every: Annotated[float, *_seconds(0.1, 3600.0)]
    uncertainty: Line


class BenchFile(Block):
    """A whole bench file."""

    bench: Token
    title: Line
    attended: YesNo
    unattended: UnattendedBlock | None = None
    port: PortBlock
    runs: RunsBlock
    supply: SupplyBlock
    cable: CableBlock
    ceilings: CeilingsBlock
    lower: LowerBlock
    warning: Annotated[float, *_seconds(3.0, 60.0)]
    lease: LeaseBlock = Field(default_factory=LeaseBlock)
    voltage: VoltageBlock
    current: CurrentBlock
    sampling: SamplingBlock
    calibration: CalibrationBlock | None = None
    cut_path: CutPathBlock
    interlock: InterlockBlock
    danger_signal: DangerSignalBlock
    inputs: InputsBlock
    ground: GroundBlock
    bleed: BleedBlock
    touch: TouchBlock
    limits: LimitsBlock
    arcs: ArcsBlock
    slow_channels: tuple[SlowChannelBlock, ...] = ()
    mqtt: MqttBlock | None = None
    daemon: DaemonBlock | None = None
    instrument: InstrumentBlock | None = None
    archive: ArchiveBlock | None = None
