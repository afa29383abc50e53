"""Parameters to values and values to answers: suffixes, MINimum, MAXimum, DEFault, Booleans, masks, strings.

Every number goes through the project's one strict parser.  IEEE 488.2 asks to listen flexibly (``.5``, ``5.``,
``007``, 255 digits, spaces around the exponent, a suffix in any case), so a number is first rewritten, in whole
numbers and without loss up to 15 digits, into the one form which that parser takes.

In a suffix M is milli and MA is mega (IEEE 488.2, 7.7.3.3: suffixes have no case), so MV is a millivolt and MAV a
megavolt; MA alone, as a current, is a milliampere.
"""

from enum import Enum

from hvhost.publish.instrument.errors import Err, ScpiError
from hvhost.publish.instrument.syntax import Kind, Param
from hvhost.words.quantities import Dimension, parse_quantity

NOT_A_NUMBER = "9.91E+37"  # SCPI-99 volume 1, 7.2.1.5
KEPT_DIGITS = 15
MULTIPLIERS: dict[str, int] = {"EX": 18, "PE": 15, "T": 12, "G": 9, "MA": 6, "K": 3, "": 0, "M": -3, "U": -6, "N": -9,
                               "P": -12, "F": -15, "A": -18}
_NOT_ALLOWED = {Kind.NUMBER: Err.NUMERIC_NOT_ALLOWED, Kind.WORD: Err.CHARACTER_DATA_NOT_ALLOWED,
                Kind.STRING: Err.STRING_NOT_ALLOWED, Kind.NON_DECIMAL: Err.NUMERIC_NOT_ALLOWED}
_INFINITE = frozenset(("INF", "INFINITY", "NINF", "NINFINITY"))


class Units(Enum):
    """What a numeric parameter counts: the suffix without multiplier, and the denominator's."""

    VOLT = ("V", "")
    AMP = ("A", "")
    VOLT_PER_SECOND = ("V", "S")
    NONE = ("", "")


class Bound(Enum):
    """The words that stand for a number."""

    MINIMUM = ("MIN", "MINIMUM")
    MAXIMUM = ("MAX", "MAXIMUM")
    DEFAULT = ("DEF", "DEFAULT")


def suffix_exponent(suffix: str, units: Units) -> int:
    """The power of ten of a suffix in capitals; raises -131 for one of another quantity, -138 where none is allowed."""
    base, per = units.value
    if not suffix:
        return 0
    if not base:
        raise ScpiError(Err.SUFFIX_NOT_ALLOWED, suffix)
    above, slash, below = suffix.partition("/")
    exponent = _power(above, base)
    if exponent is None or bool(slash) is not bool(per):
        raise ScpiError(Err.INVALID_SUFFIX, suffix)
    if not per:
        return exponent
    under = _power(below, per)
    if under is None:
        raise ScpiError(Err.INVALID_SUFFIX, suffix)
    return exponent - under


def _power(suffix: str, base: str) -> int | None:
    return MULTIPLIERS.get(suffix[:-len(base)]) if suffix.endswith(base) else None


def number_of(param: Param, units: Units = Units.NONE) -> float:
    """The SI value of a decimal number with an optional suffix of these units."""
    if param.kind is not Kind.NUMBER:
        raise ScpiError(_NOT_ALLOWED[param.kind], param.text[:40])
    exponent = param.exponent + suffix_exponent(param.suffix, units)
    return parse_quantity(rewritten(param.text, exponent), Dimension.NUMBER)


def rewritten(mantissa: str, exponent: int) -> str:
    """``mantissa`` times ten to ``exponent`` as the strict parser wants it; raises -222 beyond 99 powers of ten.

    Digits behind the fifteenth are rounded half to even, as IEEE 488.2 (7.7.2.4.1) lets a device do.
    """
    sign = "-" if mantissa.startswith("-") else ""
    whole, _, part = mantissa.lstrip("+-").partition(".")
    digits = (whole + part).lstrip("0")
    exponent -= len(part)
    if len(digits) > KEPT_DIGITS:
        cut = len(digits) - KEPT_DIGITS
        kept, rest, half = int(digits[:-cut]), int(digits[-cut:]), 5 * 10 ** (cut - 1)
        kept += rest > half or (rest == half and kept % 2 == 1)
        digits, exponent = str(kept), exponent + cut
    digits, zeros = digits.rstrip("0"), len(digits) - len(digits.rstrip("0"))
    if not digits:
        return "0"
    exponent += zeros + len(digits) - 1
    if exponent > 99:
        raise ScpiError(Err.OUT_OF_RANGE, f"{mantissa[:20]} and {exponent} powers of ten")
    if exponent < -99:
        return "0"
    return f"{sign}{digits[0]}.{digits[1:] or '0'}e{exponent}"


def number_or_bound(param: Param, units: Units) -> float | Bound:
    """A number, or the word that stands for one; raises -222 for infinities, -141 for any other word."""
    if param.kind is Kind.WORD:
        for bound in Bound:
            if param.text in bound.value:
                return bound
        if param.text in _INFINITE:
            raise ScpiError(Err.OUT_OF_RANGE, param.text)
        raise ScpiError(Err.INVALID_CHARACTER_DATA, param.text)
    return number_of(param, units)


def boolean_of(param: Param) -> bool:
    """ON or OFF, or a number that is rounded: true unless it is 0 then (SCPI-99 volume 1, 7.3)."""
    if param.kind is Kind.WORD:
        if param.text not in ("ON", "OFF"):
            raise ScpiError(Err.INVALID_CHARACTER_DATA, param.text)
        return param.text == "ON"
    return whole_of(param) != 0


def whole_of(param: Param) -> int:
    """A number rounded to the nearest whole one, or a non-decimal one."""
    if param.kind is Kind.NON_DECIMAL:
        return int(param.text)
    value = number_of(param)
    return int(value + 0.5) if value >= 0 else -int(0.5 - value)


def mask_of(param: Param, most: int) -> int:
    """A register's mask from 0 to ``most``."""
    mask = whole_of(param)
    if not 0 <= mask <= most:
        raise ScpiError(Err.OUT_OF_RANGE, f"0 to {most}")
    return mask


def string_of(param: Param) -> str:
    """The content of a quoted string."""
    if param.kind is not Kind.STRING:
        raise ScpiError(_NOT_ALLOWED[param.kind], "expected a quoted string")
    return param.text


def real(value: float | None) -> str:
    """A number as it is answered (NR3, IEEE 488.2, 8.7.4); the standard's not-a-number where there is none."""
    if value is None or not -9.9e37 < value < 9.9e37:
        return NOT_A_NUMBER
    return f"{value:.6E}"
