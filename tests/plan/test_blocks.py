"""The words of the language: values, shares, bounds, and the schema that describes them."""

import jsonschema
import pytest
import yaml

from hvhost.plan.blocks import PlanBlock, SheetBlock, parse_value
from hvhost.words.errors import QuantityFault
from hvhost.words.quantities import Dimension
from tests.plan.conftest import CONFIGS


def test_quantity_parameter_and_share_are_values() -> None:
    """A value is a quantity, a parameter's name, or a part of a parameter."""
    assert parse_value("12 kV", Dimension.VOLT).of({}) == 12e3
    assert parse_value("test_voltage", Dimension.VOLT).of({"test_voltage": 8e3}) == 8e3
    assert parse_value("75 % of test_voltage", Dimension.VOLT).of({"test_voltage": 8e3}) == pytest.approx(6e3)


@pytest.mark.parametrize(("volts", "rate"), [(5e3, 100.0), (10e3, 200.0), (20e3, 400.0), (60e3, 1200.0)])
def test_two_percent_per_second_of_the_test_voltage(volts: float, rate: float) -> None:
    """2 %/s of 5, 10, 20 and 60 kV is 100, 200, 400 and 1200 V/s (IEC 60060-1 raising, from memory)."""
    value = parse_value("2 %/s of u", Dimension.VOLT_PER_SECOND)
    assert value.needs is Dimension.VOLT
    assert value.of({"u": volts}) == pytest.approx(rate)


@pytest.mark.parametrize("text", ["", "12", "12 kv", "of x", "75 % of", "75 % of X", "2 %/s of u", "x of y", "1e400 V"])
def test_what_is_no_value_is_refused(text: str) -> None:
    """Anything that is none of the three is refused with what was expected."""
    with pytest.raises(QuantityFault) as refused:
        parse_value(text, Dimension.VOLT)
    assert refused.value.expected


def test_bounds_hold_at_once_for_a_quantity_and_later_for_a_parameter() -> None:
    """A quantity outside is refused; a parameter's value is judged when it is filled."""
    with pytest.raises(QuantityFault, match="more than 0 V"):
        parse_value("0 V", Dimension.VOLT, above=0.0)
    value = parse_value("u", Dimension.VOLT, above=0.0)
    assert value.outside(0.0) == "more than 0 V"
    assert value.outside(1.0) == ""


@pytest.mark.parametrize("name", ["withstand", "leakage", "stepvoltage", "breakdown", "demo"])
def test_examples_fit_the_json_schema(name: str) -> None:
    """The printed schema accepts the example files as an editor would read them."""
    for kind, block in (("plan", PlanBlock), ("sheet", SheetBlock)):
        text = (CONFIGS / f"{name}.{kind}.yaml").read_text(encoding="utf-8")
        data = yaml.load(text, Loader=yaml.BaseLoader)
        schema = block.model_json_schema(by_alias=True)
        jsonschema.Draft202012Validator.check_schema(schema)
        jsonschema.validate(data, schema)


def test_schema_refuses_an_unknown_key() -> None:
    """The schema knows every key of a plan and no other."""
    with pytest.raises(jsonschema.ValidationError):
        jsonschema.validate({"plan": "x", "steps": [], "stepz": []}, PlanBlock.model_json_schema(by_alias=True))
