"""The closed parser: everything of the list is read exactly, everything else is refused with the nearest right text."""

import math
from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.words.errors import QuantityFault
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

V, A, OHM, S, F = Dimension.VOLT, Dimension.AMP, Dimension.OHM, Dimension.SECOND, Dimension.FARAD
VS, PCT = Dimension.VOLT_PER_SECOND, Dimension.PERCENT

READ = [
    # SI Brochure (9th edition) table 7: prefixes, certain; values written out by hand.
    ("20 kV", V, 20_000.0), ("20kV", V, 20_000.0), ("20 mV", V, 0.02), ("20 MV", V, 2e7), ("0.1 kV", V, 100.0),
    ("-5 V", V, -5.0), ("+5 V", V, 5.0), ("0 V", V, 0.0), ("-0 V", V, 0.0), ("2.5e4 V", V, 25_000.0),
    ("1e3 V", V, 1000.0), ("4 mA", A, 0.004), ("10 uA", A, 1e-5), ("10 µA", A, 1e-5), ("10 \u03bcA", A, 1e-5),
    ("1 nA", A, 1e-9), ("1 pA", A, 1e-12), ("1 kΩ", OHM, 1000.0), ("1 k\u2126", OHM, 1000.0), ("1 kOhm", OHM, 1000.0),
    ("2.2 GΩ", OHM, 2.2e9), ("1 TΩ", OHM, 1e12), ("47 Ohm", OHM, 47.0), ("500 pF", F, 5e-10), ("1.5 uF", F, 1.5e-6),
    # Rates and percentages: 0.5 kV/min is 8.333 V/s (computed).
    ("500 V/s", VS, 500.0), ("0.5 kV/min", VS, 25 / 3), ("1 kV/s", VS, 1000.0), ("36 kV/h", VS, 10.0),
    ("1 mA/s", Dimension.AMP_PER_SECOND, 0.001), ("2 %/s", Dimension.PERCENT_PER_SECOND, 0.02),
    ("6 %/min", Dimension.PERCENT_PER_SECOND, 0.001), ("3 %", PCT, 0.03), ("250 ppm", PCT, 2.5e-4),
    # Durations
    ("60 s", S, 60.0), ("10 min", S, 600.0), ("2 h", S, 7200.0), ("1 d", S, 86_400.0), ("20 ms", S, 0.02),
    ("350 mJ", Dimension.JOULE, 0.35), ("45 µC", Dimension.COULOMB, 4.5e-5), ("50 Hz", Dimension.HERTZ, 50.0),
    ("1 kHz", Dimension.HERTZ, 1000.0), ("23.5 °C", Dimension.CELSIUS, 23.5), ("-10 degC", Dimension.CELSIUS, -10.0),
    ("101.3 kPa", Dimension.PASCAL, 101_300.0), ("1013 hPa", Dimension.PASCAL, 101_300.0),
    ("1013 mbar", Dimension.PASCAL, 101_300.0), ("1.25", Dimension.NUMBER, 1.25), ("12", Dimension.INTEGER, 12.0),
]

# The traps: what general parsers read wrongly, and what nobody should guess.  The second text is the nearest right one
# that may be suggested ('' where a suggestion would be a guess).
REFUSED = [
    ("1,5 kV", V, "1.5 kV"),  # read as 15 kV elsewhere
    ("1,500 kV", V, ""),  # decimal or grouping sign
    ("1 000 V", V, "1000 V"),  # read as 1 V or 0 V elsewhere
    ("1_000 V", V, "1000 V"),  # Python's float takes it
    ("1'000 V", V, "1000 V"),
    ("\u22125 V", V, "-5 V"),  # read as +5 V elsewhere
    ("\u20135 V", V, "-5 V"),  # en dash
    ("20 \u33b8", V, "20 kV"),  # the compatibility character for kV
    ("\uff12\uff10 kV", V, "20 kV"),  # full width
    ("\u0662\u0660 kV", V, ""),  # Arabic digits: Python's float takes them
    ("20\u00a0kV", V, "20 kV"), ("20\u202fkV", V, "20 kV"), ("20\u2009kV", V, "20 kV"),
    ("20 KV", V, "20 kV"), ("20 kv", V, "20 kV"), ("20 mv", V, ""), ("20 V/s", V, ""), ("20 k", V, ""), ("20", V, ""),
    ("20  kV", V, "20 kV"), (" 20 kV", V, "20 kV"), ("20 kV ", V, "20 kV"), ("20 kV DC", V, ""), ("20 ", V, ""),
    ("20\tkV", V, "20 kV"), ("20 kV\n", V, "20 kV"),
    ("nan", V, ""), ("nan V", V, ""), ("inf V", V, ""), ("-inf V", V, ""), ("Infinity V", V, ""), ("1e400 V", V, ""),
    ("0x10 V", V, ""), ("1e V", V, ""), ("1d3 V", V, ""), ("1.2.3 V", V, ""), ("--5 V", V, ""), ("5- V", V, ""),
    (".5 kV", V, "0.5 kV"), ("5. kV", V, "5 kV"), ("012 V", V, "12 V"), ("", V, ""), ("kV", V, ""), ("V 20", V, ""),
    ("1/2 V", V, ""), ("20 V 5 mV", V, ""), ("20 mmV", V, ""), ("20 kkV", V, ""), ("20 µV/s", V, ""),
    ("1 h 30 min", S, ""), ("10:30", S, ""), ("1min30", S, ""), ("60 sec", S, "60 s"), ("2 hours", S, "2 h"),
    ("5 m", S, ""), ("5 M", S, ""),
    ("1 min", V, ""), ("5 ma", A, "5 mA"), ("5 a", A, "5 A"), ("20 MA", A, "20 mA"),
    ("4K7", OHM, "4.7 kΩ"), ("2M2", OHM, "2.2 MΩ"), ("R47", OHM, "0.47 Ω"), ("0R1", OHM, "0.1 Ω"),  # IEC 60062
    ("4k7", OHM, ""), ("1 kohm", OHM, "1 kΩ"), ("1 K", OHM, ""),
    ("5 kV", VS, "5 kV/s"), ("5 KV", VS, ""), ("23 C", Dimension.CELSIUS, "23 °C"),
    ("50", PCT, ""), ("0.5", PCT, ""), ("5 %/s", PCT, ""), ("5 per cent", PCT, ""),
    ("1.5", Dimension.INTEGER, ""), ("1e-1", Dimension.INTEGER, ""), ("3 V", Dimension.INTEGER, ""),
    ("3 ", Dimension.INTEGER, "3"), ("true", Dimension.INTEGER, ""), ("3 V", Dimension.NUMBER, ""),
    ("9" * 41, Dimension.NUMBER, ""), ("1" * 16 + " V", V, ""),
]


@pytest.mark.parametrize(("text", "dimension", "value"), READ)
def test_reads(text: str, dimension: Dimension, value: float) -> None:
    """Number, at most one space, whitelisted unit: the exact value, correctly rounded."""
    parsed = parse_quantity(text, dimension)
    assert parsed == value
    assert math.copysign(1, parsed) == math.copysign(1, value) or value == 0


@pytest.mark.parametrize(("text", "dimension", "near"), REFUSED)
def test_refuses(text: str, dimension: Dimension, near: str) -> None:
    """Anything else is refused with expected and found; a suggestion parses, and is made only where it is no guess."""
    with pytest.raises(QuantityFault) as caught:
        parse_quantity(text, dimension)
    assert caught.value.expected == expectation(dimension)
    assert caught.value.found
    assert caught.value.remedy == (f"did you mean '{near}'?" if near else "")
    if near:
        assert math.isfinite(parse_quantity(near, dimension))


@pytest.mark.parametrize("dimension", list(Dimension))
def test_examples_parse(dimension: Dimension) -> None:
    """What a message gives as an example is right."""
    assert parse_quantity(EXAMPLES[dimension], dimension) > 0


@pytest.mark.parametrize(("symbol", "exponent"), [("p", -12), ("n", -9), ("µ", -6), ("m", -3), ("k", 3), ("M", 6),
                                                  ("G", 9), ("T", 12)])
def test_si_prefixes(symbol: str, exponent: int) -> None:
    """Prefix values are those of the SI (SI Brochure 9th edition, table 7)."""
    found = [units[symbol + unit] for units in UNITS.values() for unit in ("V", "A", "Ω", "F", "J", "C", "Hz")
             if symbol + unit in units]
    assert found
    assert set(found) == {Fraction(10) ** exponent}


@pytest.mark.parametrize("dimension", list(Dimension))
def test_other_dimensions_units_are_refused(dimension: Dimension) -> None:
    """No unit is read as another dimension's."""
    for other, units in UNITS.items():
        for unit in units:
            if unit and unit not in UNITS[dimension] and other is not dimension:
                with pytest.raises(QuantityFault):
                    parse_quantity(f"1 {unit}", dimension)


PARSED = [(dimension, unit) for dimension, units in UNITS.items() for unit in units]


@given(st.integers(-10**9, 10**9), st.integers(0, 6), st.sampled_from(PARSED), st.booleans(), st.data())
def test_value_is_number_times_unit(digits: int, places: int, where: tuple[Dimension, str], space: bool,
                                    data: st.DataObject) -> None:
    """The value is the exact product, rounded once, whatever spelling and spacing."""
    dimension, unit = where
    if dimension is Dimension.INTEGER:
        places = 0
    sign = "-" if digits < 0 else ""
    whole, part = divmod(abs(digits), 10**places)
    number = f"{sign}{whole}.{part:0{places}d}" if places else f"{sign}{whole}"
    spelling = data.draw(st.sampled_from(spellings(unit)))
    text = f"{number}{' ' if space and spelling else ''}{spelling}"
    assert parse_quantity(text, dimension) == float(Fraction(digits, 10**places) * UNITS[dimension][unit])


@given(st.text(max_size=50), st.sampled_from(list(Dimension)))
def test_any_text_is_read_or_refused(text: str, dimension: Dimension) -> None:
    """Any text gives a finite float or a QuantityFault; what is read is ASCII but for the symbols of units."""
    try:
        value = parse_quantity(text, dimension)
    except QuantityFault as fault:
        said = str(fault)
    else:
        said = ""
        assert math.isfinite(value)
        assert all(c.isascii() or c in "µ\u03bcΩ\u2126°" for c in text)
    assert said.isprintable()


@pytest.mark.parametrize(("value", "dimension", "digits", "text"), [
    (12_500.0, V, 4, "12.5 kV"), (0.0, V, 4, "0 V"), (999.96, V, 4, "1 kV"), (999.94, V, 4, "999.9 V"),
    (-25e3, V, 4, "-25 kV"), (1.25e-5, A, 4, "12.5 µA"), (1e-14, A, 4, "0.01 pA"),
    (0.432, Dimension.JOULE, 3, "432 mJ"),
    (600.0, S, 4, "600 s"), (14_400.0, S, 4, "14400 s"), (0.0153, S, 3, "15.3 ms"), (0.03, PCT, 4, "3 %"),
    (500.0, VS, 4, "500 V/s"), (8.3333, VS, 3, "8.33 V/s"), (3.0, Dimension.INTEGER, 4, "3"),
    (101_300.0, Dimension.PASCAL, 4, "101.3 kPa"), (23.5, Dimension.CELSIUS, 4, "23.5 °C"), (1e-20, V, 3, "1e-14 µV"),
    (float("nan"), V, 4, "no value"), (float("inf"), V, 4, "no value"), (5e-10, F, 4, "500 pF"), (1e9, OHM, 4, "1 GΩ")])
def test_prints(value: float, dimension: Dimension, digits: int, text: str) -> None:
    """A prefix that leaves 1 to 999 before the point, significant digits, no trailing zeros."""
    assert format_quantity(value, dimension, digits) == text


@given(st.floats(1e-9, 1e9), st.sampled_from([V, A, OHM, VS, Dimension.JOULE, Dimension.COULOMB, PCT, Dimension.HERTZ]),
       st.sampled_from([1, -1]))
def test_printed_value_reads_back(value: float, dimension: Dimension, sign: int) -> None:
    """What is printed with enough digits parses to the same value within the digits printed."""
    text = format_quantity(sign * value, dimension, 9)
    if "e" not in text:
        assert parse_quantity(text, dimension) == pytest.approx(sign * value, rel=1e-8)


def test_found_texts_are_made_printable() -> None:
    """Look-alikes are named by code point, long texts clipped, control characters not sent to a terminal."""
    assert shown("\u22125 V") == "'\u22125 V' (with U+2212)"
    assert shown("a\x1b[2J") == "'a?[2J' (with U+001B)"
    assert len(shown("x" * 1000)) < 60
    assert shown("25 KV") == "'25 KV'"
