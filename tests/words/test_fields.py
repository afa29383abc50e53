"""Field types: text in, SI value out, faults with expected, found and remedy; and their JSON Schemas."""

import re
from datetime import date
from enum import StrEnum
from typing import Annotated, Any

import pytest
from pydantic import TypeAdapter, ValidationError

from hvhost.words import fields
from hvhost.words.fields import (
    Amps,
    Block,
    Celsius,
    Day,
    Fraction,
    Line,
    SecondsOrZero,
    Token,
    Volts,
    VoltsOrZero,
    YesNo,
    matching,
    quantity,
    schema_of,
    whole,
    word_of,
)
from hvhost.words.quantities import EXAMPLES, UNITS, Dimension, parse_quantity, spellings


class Colour(StrEnum):
    RED = "red"
    DARK_BLUE = "dark blue"


Count = Annotated[int, *whole(1, 10)]
Hue = Annotated[Colour, *word_of(Colour)]
Lower = Annotated[str, *matching("[a-z]+", "small letters", 5)]
Near = Annotated[float, quantity(Dimension.VOLT, low=1.0, high=10.0), schema_of(Dimension.VOLT)]


def _read(kind: Any, value: Any) -> Any:
    return TypeAdapter(kind).validate_python(value, strict=True)


def _fault(kind: Any, value: Any) -> dict[str, Any]:
    with pytest.raises(ValidationError) as caught:
        _read(kind, value)
    (error,) = caught.value.errors()
    assert error["type"] == "hvhost"
    return dict(error["ctx"])


@pytest.mark.parametrize(("kind", "text", "value"), [
    (Volts, "25 kV", 25e3), (VoltsOrZero, "0 V", 0.0), (Amps, "4 mA", 4e-3), (SecondsOrZero, "0 s", 0.0),
    (Fraction, "50 %", 0.5), (Celsius, "-5 °C", -5.0), (Near, "1 V", 1.0), (Near, "10 V", 10.0),
    (Count, "10", 10), (Hue, "dark blue", Colour.DARK_BLUE), (Lower, "abc", "abc"), (Line, "  a b ", "a b"),
    (Token, "a-1.b_2", "a-1.b_2"), (YesNo, "yes", True), (YesNo, "no", False), (Day, "2027-03-31", date(2027, 3, 31)),
    (Day, "2028-02-29", date(2028, 2, 29))])
def test_reads(kind: Any, text: str, value: object) -> None:
    """The text gives the value in SI units and in its own type."""
    read = _read(kind, text)
    assert read == value
    assert type(read) is type(value)


@pytest.mark.parametrize(("kind", "value", "expected", "remedy"), [
    (Volts, "0 V", "more than 0 V", ""), (Volts, "-1 V", "more than 0 V", ""), (Volts, "", "a voltage", ""),
    (Volts, ("1 V",), "a voltage", ""), (Volts, "1 KV", "a voltage", "did you mean '1 kV'?"),
    (Volts, None, "a voltage", ""),
    (VoltsOrZero, "-1 V", "at least 0 V", ""), (Fraction, "101 %", "at most 100 %", ""),
    (Near, "0.9 V", "at least 1 V", ""), (Near, "10.1 V", "at most 10 V", ""),
    (Count, "0", "a whole number from 1 to 10", ""), (Count, "11", "a whole number from 1 to 10", ""),
    (Count, "1.5", "a whole number from 1 to 10", ""), (Count, "3 V", "a whole number from 1 to 10", ""),
    (Count, True, "a whole number from 1 to 10", ""),
    (Hue, "Red", "red or dark blue", "did you mean 'red'?"), (Hue, "dark-blue", "red or dark blue", "'dark blue'"),
    (Hue, "green", "red or dark blue", ""), (Hue, ("red",), "red or dark blue", ""),
    (Lower, "ABC", "small letters", ""), (Lower, "abcdef", "small letters", ""), (Lower, "abc\n", "small letters", ""),
    (Line, " ", "one line of text", ""), (Line, "a\nb", "one line of text", ""), (Line, "x" * 201, "one line", ""),
    (Token, "a b", "a name", ""), (Token, "-a", "a name", ""), (Token, "ü", "a name", ""),
    (YesNo, "true", "yes or no", "did you mean 'yes'?"), (YesNo, "Off", "yes or no", "did you mean 'no'?"),
    (YesNo, "1", "yes or no", ""), (Day, "2027-02-29", "a date such as", ""), (Day, "2027-3-1", "a date such as", ""),
    (Day, "31.12.2027", "a date such as", ""), (Day, "\uff12027-01-01", "a date such as", "")])
def test_refuses(kind: Any, value: Any, expected: str, remedy: str) -> None:
    """Anything else is a fault that says what is expected and, where it is no guess, what is nearest."""
    context = _fault(kind, value)
    assert expected in context["expected"]
    assert remedy in context["remedy"]
    assert bool(context["remedy"]) == bool(remedy)


def test_blocks_are_strict_and_closed() -> None:
    """Unknown keys are errors, values frozen."""
    class Pair(Block):
        a: Volts
        b: Count = 3

    pair = Pair.model_validate({"a": "1 V"}, strict=True)
    assert (pair.a, pair.b) == (1.0, 3)
    with pytest.raises(ValidationError):
        Pair.model_validate({"a": "1 V", "c": "2"}, strict=True)
    with pytest.raises(ValidationError):
        pair.a = 2.0  # type: ignore[misc]


def _pattern(kind: Any) -> re.Pattern[str]:
    return re.compile(TypeAdapter(kind).json_schema()["pattern"])


@pytest.mark.parametrize("dimension", [d for d in Dimension if d is not Dimension.INTEGER])
def test_schema_pattern_agrees_with_the_parser(dimension: Dimension) -> None:
    """What the schema's pattern accepts parses, every spelling of every unit is accepted, traps are not."""
    pattern = _pattern(Annotated[float, quantity(dimension), schema_of(dimension)])
    assert pattern.search(EXAMPLES[dimension])
    for unit in UNITS[dimension]:
        for spelling in spellings(unit):
            text = f"1.5 {spelling}".strip()
            assert pattern.search(text)
            parse_quantity(text, dimension)
    for trap in ("1,5 kV", "1 000 V", "nan", "inf V", "1_000 V", "\u22125 V", "012 V", ".5 V", "", "5  V"):
        assert not pattern.search(trap)


TYPES = [n for n in dir(fields) if n[0].isupper() and hasattr(getattr(fields, n), "__metadata__")]


@pytest.mark.parametrize("name", TYPES)
def test_every_field_type_describes_itself(name: str) -> None:
    """Each field type has a JSON Schema with a type."""
    assert TypeAdapter(getattr(fields, name)).json_schema()["type"]
