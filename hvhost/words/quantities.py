"""Quantities with units: a closed parser and its printer.

A text is *number, at most one space, whitelisted unit of the expected dimension*; anything else is refused with what
was expected, what was found and the nearest right text.  Nothing is guessed: ``1,5 kV`` is neither 1.5 nor 15 kV,
``20 KV`` is not kilovolt (SI Brochure 5.2: symbols are case-sensitive), a minus sign is ASCII.  Inside the program
every value is a float in SI units; a percentage is a fraction.
"""

import re
import unicodedata
from enum import StrEnum
from fractions import Fraction

from hvhost.words.errors import QuantityFault


class Dimension(StrEnum):
    """What a quantity is; the value names it in messages."""

    VOLT = "voltage"
    AMP = "current"
    OHM = "resistance"
    FARAD = "capacitance"
    SECOND = "duration"
    VOLT_PER_SECOND = "voltage slew"
    AMP_PER_SECOND = "current slew"
    JOULE = "energy"
    HERTZ = "frequency"
    CELSIUS = "temperature"
    PASCAL = "pressure"
    PERCENT = "percentage"
    PERCENT_PER_SECOND = "percentage per time"
    COULOMB = "charge"
    BYTE = "size"
    NUMBER = "number"
    INTEGER = "whole number"


_EXPONENTS = {"p": -12, "n": -9, "µ": -6, "m": -3, "": 0, "k": 3, "M": 6, "G": 9, "T": 12, "h": 2}


def _prefixed(unit: str, prefixes: str) -> dict[str, Fraction]:
    """Units with SI prefixes; '-' in ``prefixes`` stands for no prefix."""
    exponents = ((p.replace("-", ""), _EXPONENTS[p.replace("-", "")]) for p in prefixes)
    return {prefix + unit: Fraction(10) ** exponent for prefix, exponent in exponents}


def _per_time(units: dict[str, Fraction], times: dict[str, int]) -> dict[str, Fraction]:
    return {f"{unit}/{time}": factor / seconds for time, seconds in times.items() for unit, factor in units.items()}


_TIMES = {"s": 1, "min": 60, "h": 3600}

# Canonical spellings, per dimension, smallest to largest where a printer must choose.
UNITS: dict[Dimension, dict[str, Fraction]] = {
    Dimension.VOLT: _prefixed("V", "µm-kM"),
    Dimension.AMP: _prefixed("A", "pnµm-k"),
    Dimension.OHM: _prefixed("Ω", "m-kMGT"),
    Dimension.FARAD: _prefixed("F", "pnµm-"),
    Dimension.SECOND: {**_prefixed("s", "nµm-"), "min": Fraction(60), "h": Fraction(3600), "d": Fraction(86_400)},
    Dimension.VOLT_PER_SECOND: _per_time(_prefixed("V", "m-k"), _TIMES),
    Dimension.AMP_PER_SECOND: _per_time(_prefixed("A", "µm-"), _TIMES),
    Dimension.JOULE: _prefixed("J", "nµm-k"),
    Dimension.HERTZ: _prefixed("Hz", "m-kM"),
    Dimension.CELSIUS: {"°C": Fraction(1)},
    Dimension.PASCAL: {**_prefixed("Pa", "-hk"), "mbar": Fraction(100), "bar": Fraction(100_000)},
    Dimension.PERCENT: {"%": Fraction(1, 100), "ppm": Fraction(1, 10**6)},
    Dimension.PERCENT_PER_SECOND: _per_time({"%": Fraction(1, 100)}, _TIMES),
    Dimension.COULOMB: _prefixed("C", "pnµm-"),
    Dimension.BYTE: _prefixed("B", "-kMGT"),  # IEC 80000-13: decimal prefixes
    Dimension.NUMBER: {"": Fraction(1)},
    Dimension.INTEGER: {"": Fraction(1)},
}

EXAMPLES: dict[Dimension, str] = {
    Dimension.VOLT: "25 kV",
    Dimension.AMP: "4 mA",
    Dimension.OHM: "2.2 kΩ",
    Dimension.FARAD: "1.5 nF",
    Dimension.SECOND: "60 s",
    Dimension.VOLT_PER_SECOND: "500 V/s",
    Dimension.AMP_PER_SECOND: "1 mA/s",
    Dimension.JOULE: "350 mJ",
    Dimension.HERTZ: "50 Hz",
    Dimension.CELSIUS: "23 °C",
    Dimension.PASCAL: "101.3 kPa",
    Dimension.PERCENT: "1 %",
    Dimension.PERCENT_PER_SECOND: "2 %/s",
    Dimension.COULOMB: "45 µC",
    Dimension.BYTE: "2 GB",
    Dimension.NUMBER: "1.25",
    Dimension.INTEGER: "3",
}

# Second spellings that mean exactly the same symbol: micro sign and Greek mu, ohm sign and Greek omega, ASCII forms.
_SPELLINGS = (("\u03bc", "µ"), ("\u2126", "Ω"), ("Ohm", "Ω"), ("degC", "°C"))
# Units written out: suggested, never accepted.  Similar-looking units are not suggested: 'mmV' is no 'mV'.
_WRITTEN_OUT = {"sec": "s", "secs": "s", "second": "s", "seconds": "s", "mins": "min", "minute": "min",
                "minutes": "min", "hr": "h", "hrs": "h", "hour": "h", "hours": "h", "day": "d", "days": "d",
                "volt": "V", "volts": "V", "amp": "A", "amps": "A", "ampere": "A", "ohms": "Ω", "kohm": "kΩ",
                "gohm": "GΩ", "percent": "%", "c": "°C"}
_NUMBER = re.compile(r"[+-]?(?:0|[1-9][0-9]{0,14})(?:\.[0-9]{1,15})?(?:[eE][+-]?[0-9]{1,2})?", re.ASCII)
_LETTER_POINT = re.compile(r"([0-9]*)([RKMG])([0-9]+)(?: ?Ω)?", re.ASCII)  # IEC 60062: 4K7, R47
LONGEST = 40  # characters; no honest quantity is longer


def _canonical(unit: str) -> str:
    for other, ours in _SPELLINGS:
        unit = unit.replace(other, ours)
    if len(unit) > 1 and unit[0] == "u":
        unit = "µ" + unit[1:]
    return unit


def spellings(unit: str) -> tuple[str, ...]:
    """Every spelling that means this canonical unit: itself, look-alike symbols, ASCII forms."""
    others = [unit.replace(ours, other) for other, ours in _SPELLINGS if ours in unit]
    return (unit, *others, *([f"u{unit[1:]}"] if unit.startswith("µ") else []))


def expectation(dimension: Dimension) -> str:
    """What a message says is expected: "a voltage such as '25 kV'"."""
    article = "an" if dimension is Dimension.JOULE else "a"
    return f"{article} {dimension.value} such as '{EXAMPLES[dimension]}'"


def shown(text: str) -> str:
    """A found text made printable and short, in quotes; look-alike characters are named by code point."""
    clipped = text if len(text) <= LONGEST else text[: LONGEST - 3] + "..."
    odd = sorted({c for c in clipped if not (c.isascii() and c.isprintable()) and c not in "µΩ°\u03bc\u2126"})
    safe = "".join(c if c.isprintable() else "?" for c in clipped)
    codes = ", ".join(f"U+{ord(c):04X}" for c in odd[:4])
    return f"'{safe}' (with {codes})" if codes else f"'{safe}'"


def parse_quantity(text: str, dimension: Dimension) -> float:
    """Return the SI value of ``text``, correctly rounded; raises QuantityFault for anything but number and unit."""
    match = _NUMBER.match(text) if len(text) <= LONGEST else None
    if match is None:
        raise _fault(text, dimension)
    rest = text[match.end():]
    unit = rest[1:] if rest.startswith(" ") else rest
    factor = UNITS[dimension].get(_canonical(unit))
    if factor is None or (rest == " "):
        raise _fault(text, dimension)
    exact = Fraction(match.group()) * factor
    if dimension is Dimension.INTEGER and exact.denominator != 1:
        raise _fault(text, dimension)
    return float(exact)


def _fault(text: str, dimension: Dimension) -> QuantityFault:
    near = _nearest(text, dimension)
    return QuantityFault(expectation(dimension), shown(text) if text else "nothing",
                         remedy=f"did you mean '{near}'?" if near else "")


def _nearest(text: str, dimension: Dimension) -> str:
    """The nearest text that parses, or '' where none is near enough to be worth saying."""
    if len(text) > LONGEST:
        return ""
    plain = unicodedata.normalize("NFKC", text.strip()).replace("\u2212", "-").replace("\u2013", "-")
    candidates = [plain, *_number_mended(plain), *_letter_point(plain, dimension)]
    for candidate in candidates:
        mended = _unit_mended(candidate, dimension)
        if mended and mended != text:
            return mended
    return ""


def _number_mended(text: str) -> list[str]:
    """Candidates with a decimal comma, digit grouping or missing digit put right."""
    grouped = re.sub(r"(?<=[0-9])[ _'](?=[0-9]{3}(?![0-9]))", "", text)
    # '20,000' may be twenty or twenty thousand: no suggestion is better than a wrong one.
    pointed = text if re.search(r",[0-9]{3}(?![0-9])", text) else re.sub(r"(?<=[0-9]),(?=[0-9])", ".", text)
    started = re.sub(r"^([+-]?)\.(?=[0-9])", r"\g<1>0.", text)
    stripped = re.sub(r"^([+-]?)0+(?=[0-9])", r"\1", text)
    ended = re.sub(r"(?<=[0-9])\.(?![0-9])", "", text)
    return [t for t in (grouped, pointed, started, stripped, ended) if t != text]


def _letter_point(text: str, dimension: Dimension) -> list[str]:
    match = _LETTER_POINT.fullmatch(text)
    if dimension is not Dimension.OHM or match is None:
        return []
    whole, letter, part = match.groups()
    return [f"{whole or '0'}.{part} {'' if letter == 'R' else letter.lower() if letter == 'K' else letter}Ω"]


def _unit_mended(text: str, dimension: Dimension) -> str:
    match = _NUMBER.match(text)
    if match is None:
        return ""
    unit = _canonical(text[match.end():].strip())
    units = UNITS[dimension]
    if unit not in units:
        folded = (u for u in units if u.casefold() == unit.casefold())
        near = {_WRITTEN_OUT.get(unit.casefold(), ""), f"{unit}/s", *folded}
        known = [u for u in near if u and u in units]
        if len(known) != 1:  # 'mv' may be milli or mega
            return ""
        unit = known[0]
    if dimension is Dimension.INTEGER and Fraction(match.group()).denominator != 1:
        return ""
    return f"{match.group()} {unit}".strip()


def _digits(value: float, digits: int) -> str:
    """``value`` with this many significant digits, never with an exponent, no trailing zeros."""
    if value == 0:
        return "0"
    rounded = f"{value:.{digits - 1}e}"
    exponent = int(rounded.partition("e")[2])
    text = f"{float(rounded):.{max(0, digits - 1 - exponent)}f}"
    return text.rstrip("0").rstrip(".") if "." in text else text


_PRINTED: dict[Dimension, tuple[str, ...]] = {
    Dimension.SECOND: ("ns", "µs", "ms", "s"),
    Dimension.VOLT_PER_SECOND: ("mV/s", "V/s", "kV/s"),
    Dimension.AMP_PER_SECOND: ("µA/s", "mA/s", "A/s"),
    Dimension.PASCAL: ("Pa", "kPa"),
    Dimension.PERCENT: ("%",),
    Dimension.PERCENT_PER_SECOND: ("%/s",),
}


def format_quantity(value: float, dimension: Dimension, digits: int = 4) -> str:
    """Print an SI value with a prefix that leaves 1 to 999 before the point where the whitelist has one: '12.5 kV'."""
    if value != value or value in (float("inf"), float("-inf")):
        return "no value"
    units = _PRINTED.get(dimension) or tuple(UNITS[dimension])
    chosen = units[0]
    for unit in units:
        scaled = float(_digits(abs(value) / float(UNITS[dimension][unit]), digits))
        if scaled >= 1:
            chosen = unit
    if value == 0:
        chosen = next((u for u in units if UNITS[dimension][u] == 1), units[0])
    scaled = value / float(UNITS[dimension][chosen])
    if scaled and not 1e-3 <= abs(scaled) < 1e12:
        return f"{scaled:.{digits}g} {chosen}".strip()
    return f"{_digits(scaled, digits)} {chosen}".strip()
