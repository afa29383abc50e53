"""Field types for models over a tree of texts: quantities, whole numbers, yes/no, words of an enumeration, dates.

Each takes the text that was typed and gives the SI value; a fault carries expected, found and remedy.  Each also
describes itself in a JSON Schema, so that an editor can check a file while it is written.
"""

import re
from collections.abc import Callable, Mapping
from datetime import date
from enum import StrEnum
from typing import Annotated, Any

from pydantic import BaseModel, BeforeValidator, ConfigDict, WithJsonSchema
from pydantic_core import PydanticCustomError

from hvhost.words.errors import QuantityFault
from hvhost.words.nearest import nearest_word
from hvhost.words.quantities import (
    EXAMPLES,
    UNITS,
    Dimension,
    expectation,
    format_quantity,
    parse_quantity,
    shown,
    spellings,
)

_NUMBER_PATTERN = r"[+-]?(0|[1-9][0-9]*)(\.[0-9]+)?([eE][+-]?[0-9]{1,2})?"


class Block(BaseModel):
    """Base of every block of keys: strict, frozen, unknown keys are faults."""

    model_config = ConfigDict(strict=True, extra="forbid", frozen=True, hide_input_in_errors=True)


def fault(expected: str, found: str = "", remedy: str = "") -> PydanticCustomError:
    """The fault that a field type raises; ``found`` empty means: what stands in the file."""
    return PydanticCustomError("hvhost", "expected {expected}",
                               {"expected": expected, "found": found, "remedy": remedy})


def _text(value: Any, expected: str) -> str:
    if not isinstance(value, str) or value == "":
        raise fault(expected)
    return value


def _bounded(value: float, dimension: Dimension, low: float | None, high: float | None, above: float | None,
             text: str) -> float:
    if low is not None and value < low:
        raise fault(f"at least {format_quantity(low, dimension)}", shown(text))
    if above is not None and value <= above:
        raise fault(f"more than {format_quantity(above, dimension)}", shown(text))
    if high is not None and value > high:
        raise fault(f"at most {format_quantity(high, dimension)}", shown(text))
    return value


def quantity(dimension: Dimension, low: float | None = None, high: float | None = None,
             above: float | None = None) -> BeforeValidator:
    """Validator of one dimension with bounds in SI units: ``low``/``high`` inclusive, ``above`` exclusive."""
    def validate(value: Any) -> float:
        if isinstance(value, float):
            return value  # a default of the model, already SI
        text = _text(value, expectation(dimension))
        try:
            parsed = parse_quantity(text, dimension)
        except QuantityFault as refused:
            raise fault(refused.expected, refused.found, refused.remedy) from None
        return _bounded(parsed, dimension, low, high, above, text)
    return BeforeValidator(validate)


def schema_of(dimension: Dimension) -> WithJsonSchema:
    """A string with the whitelisted units, and an example."""
    units = "|".join(re.escape(s) for u in UNITS[dimension] if u for s in spellings(u))
    pattern = f"^{_NUMBER_PATTERN} ?({units})$" if units else f"^{_NUMBER_PATTERN}$"
    kinds: list[str] = ["string"] if units else ["string", "number"]
    return WithJsonSchema({"type": kinds, "pattern": pattern, "description": f"{dimension.value}, e.g. "
                           f"'{EXAMPLES[dimension]}'"})


def _whole(low: int, high: int) -> BeforeValidator:
    def validate(value: Any) -> int:
        if isinstance(value, int) and not isinstance(value, bool):
            return value
        expected = f"a whole number from {low} to {high}"
        text = _text(value, expected)
        try:
            number = int(parse_quantity(text, Dimension.INTEGER))
        except QuantityFault as refused:
            raise fault(expected, refused.found, refused.remedy) from None
        if not low <= number <= high:
            raise fault(expected, shown(text))
        return number
    return BeforeValidator(validate)


def whole(low: int, high: int) -> tuple[BeforeValidator, WithJsonSchema]:
    """Metadata of a whole number within bounds: ``Annotated[int, *whole(1, 4)]``."""
    return _whole(low, high), WithJsonSchema({"type": ["string", "integer"], "pattern": "^(0|-?[1-9][0-9]*)$",
                                              "minimum": low, "maximum": high})


def _one_of(words: dict[str, Any], meant: Mapping[str, str] | None = None) -> BeforeValidator:
    expected = f"one of {', '.join(words)}" if len(words) > 2 else " or ".join(words)

    def validate(value: Any) -> Any:
        if not isinstance(value, str):
            if any(value == known and type(value) is type(known) for known in words.values()):
                return value
            raise fault(expected)
        if value not in words:
            near = (meant or {}).get(value.casefold()) or nearest_word(value, words)
            raise fault(expected, remedy=f"did you mean '{near}'?" if near else "")
        return words[value]
    return BeforeValidator(validate)


def word_of(kind: type[StrEnum]) -> tuple[BeforeValidator, WithJsonSchema]:
    """Metadata of one word of an enumeration: ``Annotated[GroundDevice, *word_of(GroundDevice)]``."""
    words = {member.value: member for member in kind}
    return _one_of(words), WithJsonSchema({"type": "string", "enum": list(words)})


def matching(pattern: str, expected: str, longest: int = 200) -> tuple[BeforeValidator, WithJsonSchema]:
    """Metadata of a text of a certain form: ``Annotated[str, *matching(r"[a-z]+", "small letters")]``."""
    form = re.compile(pattern, re.ASCII)

    def validate(value: Any) -> str:
        text = _text(value, expected)
        if len(text) > longest or form.fullmatch(text) is None:
            raise fault(expected)
        return text
    return BeforeValidator(validate), WithJsonSchema({"type": "string", "pattern": f"^(?:{pattern})$",
                                                      "maxLength": longest})


def _line(longest: int) -> Callable[[Any], str]:
    def validate(value: Any) -> str:
        expected = f"one line of text, at most {longest} characters"
        text = _text(value, expected).strip()
        if len(text) > longest or not text or not all(c.isprintable() for c in text):
            raise fault(expected)
        return text
    return validate


def _day(value: Any) -> date:
    if isinstance(value, date):
        return value
    expected = "a date such as '2027-03-31'"
    text = _text(value, expected)
    if re.fullmatch(r"[0-9]{4}-[0-9]{2}-[0-9]{2}", text, re.ASCII) is None:
        raise fault(expected)
    try:
        return date.fromisoformat(text)
    except ValueError:
        raise fault(expected, f"{shown(text)}, which the calendar does not have") from None


_V, _A, _S = Dimension.VOLT, Dimension.AMP, Dimension.SECOND
_VS, _AS = Dimension.VOLT_PER_SECOND, Dimension.AMP_PER_SECOND

# Volts, Amps ... are positive; the forms OrZero start at zero; the forms Signed have no bound.
Volts = Annotated[float, quantity(_V, above=0.0), schema_of(_V)]
VoltsOrZero = Annotated[float, quantity(_V, low=0.0), schema_of(_V)]
SignedVolts = Annotated[float, quantity(_V), schema_of(_V)]
Amps = Annotated[float, quantity(_A, above=0.0), schema_of(_A)]
AmpsOrZero = Annotated[float, quantity(_A, low=0.0), schema_of(_A)]
SignedAmps = Annotated[float, quantity(_A), schema_of(_A)]
Seconds = Annotated[float, quantity(_S, above=0.0), schema_of(_S)]
SecondsOrZero = Annotated[float, quantity(_S, low=0.0), schema_of(_S)]
VoltsPerSecond = Annotated[float, quantity(_VS, above=0.0), schema_of(_VS)]
AmpsPerSecond = Annotated[float, quantity(_AS, above=0.0), schema_of(_AS)]
Ohms = Annotated[float, quantity(Dimension.OHM, above=0.0), schema_of(Dimension.OHM)]
Farads = Annotated[float, quantity(Dimension.FARAD, above=0.0), schema_of(Dimension.FARAD)]
FaradsOrZero = Annotated[float, quantity(Dimension.FARAD, low=0.0), schema_of(Dimension.FARAD)]
Joules = Annotated[float, quantity(Dimension.JOULE, above=0.0), schema_of(Dimension.JOULE)]
Coulombs = Annotated[float, quantity(Dimension.COULOMB, above=0.0), schema_of(Dimension.COULOMB)]
Hertz = Annotated[float, quantity(Dimension.HERTZ, above=0.0), schema_of(Dimension.HERTZ)]
Celsius = Annotated[float, quantity(Dimension.CELSIUS, low=-90.0, high=500.0), schema_of(Dimension.CELSIUS)]
Pascals = Annotated[float, quantity(Dimension.PASCAL, above=0.0), schema_of(Dimension.PASCAL)]
Fraction = Annotated[float, quantity(Dimension.PERCENT, low=0.0, high=1.0), schema_of(Dimension.PERCENT)]
PercentPerSecond = Annotated[float, quantity(Dimension.PERCENT_PER_SECOND, above=0.0),
                             schema_of(Dimension.PERCENT_PER_SECOND)]
Number = Annotated[float, quantity(Dimension.NUMBER), schema_of(Dimension.NUMBER)]
_MEANT = {"true": "yes", "on": "yes", "y": "yes", "false": "no", "off": "no", "n": "no"}
YesNo = Annotated[bool, _one_of({"yes": True, "no": False}, _MEANT), WithJsonSchema({"type": ["string", "boolean"]})]
Line = Annotated[str, BeforeValidator(_line(200)), WithJsonSchema({"type": "string", "maxLength": 200})]
Token = Annotated[str, *matching(r"[A-Za-z0-9][A-Za-z0-9._-]{0,63}",
                                 "a name of letters, digits, '.', '_' and '-', at most 64 characters", 64)]
Day = Annotated[date, BeforeValidator(_day), WithJsonSchema({"type": "string", "format": "date"})]
