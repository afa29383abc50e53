"""The words of the plan language and of the run sheet, as blocks of keys with their types.

A value of a plan is a quantity (``12 kV``), a declared parameter (``test_voltage``), or a part of one
(``75 % of test_voltage``; for a rate ``2 %/s of test_voltage``).  These classes say what may be written; what it means
together is checked in ``language`` and ``unroll``.
"""

import re
from typing import Annotated, Any, Literal

from pydantic import BeforeValidator, Field, WithJsonSchema

from hvhost.plan.plan import Value
from hvhost.plan.program import CriterionKind, HoldClock, SpecimenKind, WhenOut
from hvhost.words.errors import QuantityFault
from hvhost.words.fields import (
    Block,
    Celsius,
    Day,
    Farads,
    Fraction,
    Line,
    Pascals,
    YesNo,
    fault,
    matching,
    quantity,
    schema_of,
    word_of,
)
from hvhost.words.quantities import Dimension, expectation, parse_quantity, shown

NAME = r"[a-z][a-z0-9_]{0,39}"
_NAME = re.compile(NAME, re.ASCII)
_SHARE = re.compile(rf"(.{{1,40}}?) of ({NAME})", re.ASCII)

# What a share of a parameter is written in, and what the parameter then measures.
_SHARES = {Dimension.VOLT_PER_SECOND: (Dimension.PERCENT_PER_SECOND, Dimension.VOLT)}


def parse_value(text: str, dimension: Dimension, low: float | None = None, above: float | None = None,
                high: float | None = None) -> Value:
    """Return the value that a text of the plan stands for; raises `QuantityFault`.

    Bounds (``low`` and ``high`` inclusive, ``above`` exclusive, SI) hold for a quantity at once and for a parameter
    when it is filled.
    """
    if _NAME.fullmatch(text):
        return Value(factor=1.0, parameter=text, dimension=dimension, needs=dimension, low=low, above=above, high=high)
    share = _SHARE.fullmatch(text)
    if share:
        written, needs = _SHARES.get(dimension, (Dimension.PERCENT, dimension))
        return Value(factor=parse_quantity(share[1], written), parameter=share[2], dimension=dimension, needs=needs,
                     low=low, above=above, high=high)
    try:
        value = Value(factor=parse_quantity(text, dimension), dimension=dimension, needs=dimension, low=low,
                      above=above, high=high)
    except QuantityFault as refused:
        raise QuantityFault(f"{refused.expected} or the name of a parameter", refused.found,
                            remedy=refused.remedy) from None
    bound = value.outside(value.factor)
    if bound:
        raise QuantityFault(bound, shown(text))
    return value


def _value(dimension: Dimension, low: float | None = None, above: float | None = None,
           high: float | None = None) -> tuple[BeforeValidator, WithJsonSchema]:
    def validate(raw: Any) -> Value:
        if isinstance(raw, Value):
            return raw
        if not isinstance(raw, str) or not raw:
            raise fault(f"{expectation(dimension)} or the name of a parameter")
        try:
            return parse_value(raw, dimension, low, above, high)
        except QuantityFault as refused:
            raise fault(refused.expected, refused.found, refused.remedy) from None
    example = schema_of(dimension).json_schema or {}
    schema = {"anyOf": [{k: v for k, v in example.items() if k != "description"},
                        {"type": "string", "pattern": f"^(.+ of )?{NAME}$"}],
              "description": f"{example.get('description', dimension.value)}, a parameter, or a share of one"}
    return BeforeValidator(validate), WithJsonSchema(schema)


Voltage = Annotated[Value, *_value(Dimension.VOLT, low=0.0)]
PositiveVoltage = Annotated[Value, *_value(Dimension.VOLT, above=0.0)]
Current = Annotated[Value, *_value(Dimension.AMP, above=0.0)]
Duration = Annotated[Value, *_value(Dimension.SECOND, above=0.0)]
ReadingTime = Annotated[Value, *_value(Dimension.SECOND, low=0.0)]
Rate = Annotated[Value, *_value(Dimension.VOLT_PER_SECOND, above=0.0)]
Energy = Annotated[Value, *_value(Dimension.JOULE, above=0.0)]
Tolerance = Annotated[Value, *_value(Dimension.PERCENT, above=0.0, high=0.2)]
Count = Annotated[Value, *_value(Dimension.INTEGER, low=1.0, high=1000.0)]
Name = Annotated[str, *matching(NAME, "a name of small letters, digits and '_', beginning with a letter", 40)]
Written = Annotated[str, *matching(r"[^\n]{1,80}", "a value", 80)]  # its dimension depends on another key


def _back(raw: Any) -> Value:
    """Volts below the breakdown, or a percentage of it."""
    if isinstance(raw, Value):
        return raw
    expected = "a percentage of the breakdown voltage such as '20 %', or volts below it such as '2 kV'"
    if not isinstance(raw, str) or not raw:
        raise fault(expected)
    for dimension, high in ((Dimension.PERCENT, 1.0), (Dimension.VOLT, None)):
        try:
            return parse_value(raw, dimension, above=0.0, high=high)
        except QuantityFault:
            continue
    raise fault(expected)


Back = Annotated[Value, BeforeValidator(_back), WithJsonSchema({"type": "string"})]


class LimitsBlock(Block):
    """Limits tighter than the bench's."""

    trip: Current | None = None
    level: Current | None = None
    level_time: Duration | None = None
    overvoltage: PositiveVoltage | None = None
    arc_energy: Energy | None = None


class _StepTerms(Block):
    name: Name | None = None
    current_limit: Current | None = None
    limits: LimitsBlock | None = None


class RampBlock(_StepTerms):
    """A ramp."""

    to: Voltage
    rate: Rate | None = None
    duration: Duration | None = None
    until: Literal["breakdown"] | None = None


class _HoldTerms(_StepTerms):
    hold_for: Duration = Field(alias="for")
    at_most: Duration
    clock: Annotated[HoldClock, *word_of(HoldClock)] = HoldClock.CONTINUOUS
    when_out: Annotated[WhenOut, *word_of(WhenOut)] | None = None
    tolerance: Tolerance | None = None
    window: Duration | None = None
    readings: tuple[ReadingTime, ...] = ()
    origin: Line | None = None
    guard_band: YesNo = False


class HoldBlock(_HoldTerms):
    """A hold."""


class StaircaseBlock(_HoldTerms):
    """Equal steps, each a ramp and a hold."""

    start: PositiveVoltage = Field(alias="from")
    to: PositiveVoltage
    step: PositiveVoltage
    rate: Rate | None = None


class RepeatBlock(Block):
    """Steps done several times over."""

    times: Count
    steps: tuple["StepBlock", ...]


class StepBlock(Block):
    """One item of ``steps``: exactly one of these keys."""

    ramp: RampBlock | None = None
    hold: HoldBlock | None = None
    staircase: StaircaseBlock | None = None
    rest: Duration | None = None
    repeat: RepeatBlock | None = None


RepeatBlock.model_rebuild()


class ArcBlock(Block):
    """The arc reaction."""

    reaction: Literal["latch", "pause"]
    count: Annotated[Value, *_value(Dimension.INTEGER, low=1.0, high=10_000.0)] | None = None
    rest: Duration | None = None
    window: Duration | None = None


class RetreatBlock(Block):
    """What follows an arc pause."""

    rest: Duration | None = None
    back: Back
    climb: Rate | None = None
    series: Annotated[Value, *_value(Dimension.INTEGER, low=1.0, high=10_000.0)]


class CriterionBlock(Block):
    """One acceptance criterion."""

    criterion: Annotated[CriterionKind, *word_of(CriterionKind)]
    limit: Written | None = None
    hold: Name | None = None
    at: ReadingTime | None = None
    tolerance: Tolerance | None = None
    guard_band: YesNo = False


class ParameterBlock(Block):
    """A declared parameter; the texts are read in the dimension that ``quantity`` names."""

    quantity: Annotated[Dimension, *word_of(Dimension)]
    low: Written = Field(alias="from")
    high: Written = Field(alias="to")
    default: Written | None = None


class ReleaseBlock(Block):
    """Who released the plan, and when."""

    by: Line
    on: Day


class PlanBlock(Block):
    """A plan file."""

    plan: Line
    specimen: Annotated[SpecimenKind, *word_of(SpecimenKind)] = SpecimenKind.NOT_SELF_RESTORING
    released: ReleaseBlock | None = None
    parameters: dict[Name, ParameterBlock] = Field(default_factory=dict)
    current_limit: Current | None = None
    limits: LimitsBlock | None = None
    arc: ArcBlock | None = None
    retreat: RetreatBlock | None = None
    steps: tuple[StepBlock, ...]
    acceptance: tuple[CriterionBlock, ...] = ()


class CapacitanceWindow(Block):
    """From one capacitance to another."""

    low: Farads = Field(alias="from")
    high: Farads = Field(alias="to")


class CurrentWindow(Block):
    """From one current to another."""

    low: Annotated[float, quantity(Dimension.AMP, above=0.0), schema_of(Dimension.AMP)] = Field(alias="from")
    high: Annotated[float, quantity(Dimension.AMP, above=0.0), schema_of(Dimension.AMP)] = Field(alias="to")


class ConnectedBlock(Block):
    """What proves that a specimen was connected."""

    capacitance: CapacitanceWindow | None = None
    current: CurrentWindow | None = None


class ConfirmedBlock(Block):
    """What the operator confirms."""

    polarity: Literal["positive", "negative"] | None = None
    ground_removed: YesNo | None = None
    grounded_while_connecting: YesNo | None = None
    area_clear: YesNo | None = None


class EnvironmentBlock(Block):
    """Air around the specimen."""

    temperature: Celsius | None = None
    humidity: Fraction | None = None
    pressure: Pascals | None = None


SPECIMEN = r"[A-Za-z0-9][A-Za-z0-9 ._/#+:-]{0,63}"
Specimen = Annotated[str, *matching(SPECIMEN, "a specimen ID: letters, digits, spaces and . _ / # + : -, at most 64 "
                                              "characters", 64)]
Remark = Annotated[str, *matching(r"[\s\S]{1,4000}", "a text of at most 4000 characters", 4000)]


class SheetBlock(Block):
    """A run sheet file."""

    sheet: Line
    specimen: Specimen
    order: Line | None = None
    operator: Line | None = None
    second_person: Line | None = None
    repeat_of: Line | None = None
    specimen_data: dict[Line, Line] = Field(default_factory=dict)
    environment: EnvironmentBlock | None = None
    values: dict[Name, Written] = Field(default_factory=dict)
    connected: ConnectedBlock | None = None
    confirmed: ConfirmedBlock | None = None
    remarks: Remark | None = None

