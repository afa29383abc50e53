"""Values: suffixes in any case by IEEE 488.2, the one strict number parser behind a flexible ear, words, masks."""

from decimal import Decimal

import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from hvhost.publish.instrument.errors import Err, ScpiError
from hvhost.publish.instrument.syntax import Kind, Param, Unit, parse_message
from hvhost.publish.instrument.values import (
    MULTIPLIERS,
    NOT_A_NUMBER,
    Bound,
    Units,
    boolean_of,
    mask_of,
    number_of,
    number_or_bound,
    real,
    rewritten,
    string_of,
    suffix_exponent,
    whole_of,
)


def param(text: str) -> Param:
    """The one parameter of a message."""
    unit = parse_message(f"X {text}".encode("latin-1"))[0]
    assert isinstance(unit, Unit), unit
    return unit.params[0]


def error_of(text: str, units: Units = Units.VOLT) -> Err:
    """The error of a numeric parameter."""
    with pytest.raises(ScpiError) as caught:
        number_or_bound(param(text), units)
    return caught.value.number


def test_multipliers_are_the_standards() -> None:
    """IEEE 488.2, table 7-2 (from memory, READ for MV in an independent library): EX PE T G MA K M U N P F A."""
    assert MULTIPLIERS == {"EX": 18, "PE": 15, "T": 12, "G": 9, "MA": 6, "K": 3, "": 0, "M": -3, "U": -6, "N": -9,
                           "P": -12, "F": -15, "A": -18}


@pytest.mark.parametrize(("text", "units", "value"), [
    ("20", Units.VOLT, 20.0), ("20V", Units.VOLT, 20.0), ("20 v", Units.VOLT, 20.0),
    ("20kV", Units.VOLT, 2e4), ("20 KV", Units.VOLT, 2e4), ("20 kv", Units.VOLT, 2e4),
    ("20 MV", Units.VOLT, 0.02), ("20 mV", Units.VOLT, 0.02), ("20 mv", Units.VOLT, 0.02),
    ("20 MAV", Units.VOLT, 2e7), ("20 mav", Units.VOLT, 2e7), ("3 uV", Units.VOLT, 3e-6),
    ("1 MA", Units.AMP, 1e-3), ("1 ma", Units.AMP, 1e-3), ("1 mA", Units.AMP, 1e-3), ("1 MAA", Units.AMP, 1e6),
    ("7 UA", Units.AMP, 7e-6), ("7 NA", Units.AMP, 7e-9), ("7 PA", Units.AMP, 7e-12), ("7 A", Units.AMP, 7.0),
    ("500 V/S", Units.VOLT_PER_SECOND, 500.0), ("0.5kV/s", Units.VOLT_PER_SECOND, 500.0),
    ("1 v/ms", Units.VOLT_PER_SECOND, 1000.0), ("500 MV/S", Units.VOLT_PER_SECOND, 0.5),
    ("-5", Units.VOLT, -5.0), (".5", Units.VOLT, 0.5), ("5.", Units.VOLT, 5.0), ("007", Units.VOLT, 7.0),
    ("1.5 E 3", Units.VOLT, 1500.0), ("+0", Units.VOLT, 0.0), ("1e-200", Units.VOLT, 0.0),
    ("0.000000000000000000005 EXV", Units.VOLT, 5e-3)])
def test_numbers_with_suffixes(text: str, units: Units, value: float) -> None:
    """A suffix has no case: MV is a millivolt and MAV a megavolt."""
    assert number_of(param(text), units) == value


@pytest.mark.parametrize(("text", "units", "number"), [
    ("5 A", Units.VOLT, Err.INVALID_SUFFIX), ("5 V", Units.AMP, Err.INVALID_SUFFIX),
    ("5 V/S", Units.VOLT, Err.INVALID_SUFFIX), ("5 V", Units.VOLT_PER_SECOND, Err.INVALID_SUFFIX),
    ("5 V/MIN", Units.VOLT_PER_SECOND, Err.INVALID_SUFFIX), ("5 K", Units.VOLT, Err.INVALID_SUFFIX),
    ("5 MMV", Units.VOLT, Err.INVALID_SUFFIX), ("5 X10", Units.VOLT, Err.INVALID_SUFFIX),
    ("0x10", Units.VOLT, Err.INVALID_SUFFIX), ("5 V", Units.NONE, Err.SUFFIX_NOT_ALLOWED),
    ("1e400", Units.VOLT, Err.OUT_OF_RANGE), ("1e99 KV", Units.VOLT, Err.OUT_OF_RANGE),
    ("nan", Units.VOLT, Err.INVALID_CHARACTER_DATA), ("inf", Units.VOLT, Err.OUT_OF_RANGE),
    ("NINF", Units.VOLT, Err.OUT_OF_RANGE), ("MAXI", Units.VOLT, Err.INVALID_CHARACTER_DATA),
    ("UP", Units.VOLT, Err.INVALID_CHARACTER_DATA), ('"5"', Units.VOLT, Err.STRING_NOT_ALLOWED),
    ("#H10", Units.VOLT, Err.NUMERIC_NOT_ALLOWED)])
def test_what_is_no_number_of_these_units(text: str, units: Units, number: Err) -> None:
    """Nothing is guessed: a wrong unit, a bare multiplier, a word, an infinity, a string are told apart."""
    assert error_of(text, units) is number


@given(st.decimals(allow_nan=False, allow_infinity=False, min_value=-10**12, max_value=10**12, places=6),
       st.integers(-20, 20))
def test_rewriting_changes_no_value(value: Decimal, exponent: int) -> None:
    """Compared with decimal arithmetic: up to fifteen digits without loss, more rounded there half to even."""
    mantissa = f"{value:f}"
    wanted = (value * Decimal(10) ** exponent).normalize()
    got = Decimal(rewritten(mantissa, exponent))
    if len(wanted.as_tuple().digits) <= 15:
        assert got == wanted
    else:
        assert abs(got - wanted) <= abs(wanted) * Decimal("1e-14")


@given(st.text(st.sampled_from("0123456789"), min_size=1, max_size=60),
       st.text(st.sampled_from("0123456789"), max_size=60), st.integers(-200, 200))
def test_whatever_is_rewritten_is_taken_by_the_strict_parser(whole: str, part: str, exponent: int) -> None:
    """The flexible ear hands on only the one form that the strict parser takes, or says 'out of range'."""
    given_number = Param(kind=Kind.NUMBER, text=f"{whole}.{part}", exponent=exponent)
    exact = Decimal(f"{whole}.{part or '0'}") * Decimal(10) ** exponent
    if exact >= Decimal("1e100"):
        with pytest.raises(ScpiError) as caught:
            number_of(given_number)
        assert caught.value.number is Err.OUT_OF_RANGE
        return
    assume(exact == 0 or Decimal("1e-90") < exact < Decimal("9.9e99"))
    assert number_of(given_number) == pytest.approx(float(exact), rel=1e-14)


def test_a_denominator_has_multipliers_too() -> None:
    """V/MS is a volt a millisecond."""
    assert suffix_exponent("KV/MS", Units.VOLT_PER_SECOND) == 6


@pytest.mark.parametrize(("text", "bound"), [("MIN", Bound.MINIMUM), ("minimum", Bound.MINIMUM),
                                             ("max", Bound.MAXIMUM), ("MAXimum", Bound.MAXIMUM),
                                             ("DEF", Bound.DEFAULT), ("default", Bound.DEFAULT)])
def test_words_for_bounds(text: str, bound: Bound) -> None:
    """MINimum, MAXimum and DEFault in short and long form, any case."""
    assert number_or_bound(param(text), Units.VOLT) is bound


@pytest.mark.parametrize(("text", "on"), [("ON", True), ("off", False), ("1", True), ("0", False), ("0.4", False),
                                          ("0.5", True), ("-1", True), ("2", True), ("#B0", False), ("1e-99", False)])
def test_booleans(text: str, on: bool) -> None:
    """SCPI-99 volume 1, 7.3: ON, OFF, or a number rounded to a whole one and true unless 0."""
    assert boolean_of(param(text)) is on


@pytest.mark.parametrize(("text", "number"), [("YES", Err.INVALID_CHARACTER_DATA), ('"ON"', Err.STRING_NOT_ALLOWED),
                                              ("1 V", Err.SUFFIX_NOT_ALLOWED), ("TRUE", Err.INVALID_CHARACTER_DATA)])
def test_what_is_no_boolean(text: str, number: Err) -> None:
    """Other words, strings and units are refused."""
    with pytest.raises(ScpiError) as caught:
        boolean_of(param(text))
    assert caught.value.number is number


def test_masks_are_rounded_bounded_and_may_be_non_decimal() -> None:
    """Registers take NRf and #H, #Q, #B; what does not fit is out of range."""
    assert [mask_of(param(text), 255) for text in ("32", "31.6", "#H20", "#Q40", "#B100000")] == [32] * 5
    for text in ("256", "-1", "1e9", "#H100"):
        with pytest.raises(ScpiError) as caught:
            mask_of(param(text), 255)
        assert caught.value.number is Err.OUT_OF_RANGE


def test_rounding_is_to_the_nearest() -> None:
    """IEEE 488.2, 7.7.2: a half away from zero."""
    assert [whole_of(param(text)) for text in ("0.5", "1.4", "-0.5", "-1.4")] == [1, 1, -1, -1]


def test_a_string_is_quoted() -> None:
    """A bare word or number is another type."""
    assert string_of(param("'over current'")) == "over current"
    for text, number in (("overcurrent", Err.CHARACTER_DATA_NOT_ALLOWED), ("5", Err.NUMERIC_NOT_ALLOWED)):
        with pytest.raises(ScpiError) as caught:
            string_of(param(text))
        assert caught.value.number is number


@given(st.floats(allow_nan=True, allow_infinity=True))
def test_an_answer_is_a_number_in_the_standards_form(value: float) -> None:
    """NR3; what is no number is 9.91E37 (SCPI-99 volume 1, 7.2.1.5), and everybody can read it."""
    text = real(value)
    if text != NOT_A_NUMBER:
        assert float(text) == pytest.approx(value, rel=1e-6, abs=1e-300)
    assert "E" in text
    assert real(None) == NOT_A_NUMBER
