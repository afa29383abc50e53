"""Program messages of IEEE 488.2 (chapter 7) with SCPI-99's compound headers: bytes -> units.  Pure and bounded.

A message is units between semicolons; a unit is a header, perhaps ``?``, and parameters between commas.  A header that
does not begin with a colon goes on from where the last one of the message stood (SCPI-99 volume 1, 6.2.4): after
``SOUR:VOLT 5e3`` the header ``CURR`` is ``SOUR:CURR``.  Common commands (``*``) leave that place alone.

A unit that breaks the grammar becomes a :class:`Broken` unit and the reader goes on behind the next semicolon: whoever
carries the message out stops at the first broken unit, but must find every stop in it, wherever it stands.
"""

import re
from collections.abc import Iterator
from dataclasses import dataclass
from enum import StrEnum

from hvhost.publish.instrument.errors import Err, ScpiError

MESSAGE_MAX = 1024  # bytes of a line
UNITS_MAX = 32
PARAMETERS_MAX = 16
NODES_MAX = 8
MNEMONIC_MAX = 12  # IEEE 488.2, 7.6.1.4.1; its numeric suffix not counted
SUFFIX_MAX = 12  # IEEE 488.2, 7.7.3
DIGITS_MAX = 255  # IEEE 488.2, 7.7.2.4.1
EXPONENT_MAX = 32_000


class Kind(StrEnum):
    """What a parameter is, by its form alone."""

    NUMBER = "number"
    WORD = "word"
    STRING = "string"
    NON_DECIMAL = "non-decimal number"


@dataclass(frozen=True, slots=True, kw_only=True)
class Param:
    """One parameter.  NUMBER: ``text`` is the mantissa, ``exponent`` and ``suffix`` beside it; others: the content."""

    kind: Kind
    text: str
    exponent: int = 0
    suffix: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class Unit:
    """One command or query: the whole header from the root, and the same as it was written, in capitals."""

    header: tuple[str, ...]
    written: tuple[str, ...]
    query: bool = False
    params: tuple[Param, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class Broken:
    """A unit that breaks the grammar, and how."""

    error: ScpiError


Message = tuple[Unit | Broken, ...]

# White space is every control character but newline, and the space (IEEE 488.2, 7.4.1.2).
_WS = r"[\x00-\x09\x0b-\x20]"
_SPACE = re.compile(rf"{_WS}*")
_HEADER = re.compile(r"(\*[A-Za-z][A-Za-z0-9_]*|:?[A-Za-z][A-Za-z0-9_]*(?::[A-Za-z][A-Za-z0-9_]*)*)(\?)?")
_NUMBER = re.compile(rf"([+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+))(?:{_WS}*[eE]{_WS}*([+-]?[0-9]+))?")
_SUFFIX = re.compile(rf"{_WS}*([A-Za-z/][A-Za-z0-9/.\-]*)")
_WORD = re.compile(r"[A-Za-z][A-Za-z0-9_]*")
_STRING = re.compile(r'"((?:[^"]|"")*)"|\'((?:[^\']|\'\')*)\'')
_NON_DECIMAL = re.compile(r"#(?:[Hh]([0-9A-Fa-f]+)|[Qq]([0-7]+)|[Bb]([01]+))")
_BASES = (16, 8, 2)


def parse_message(line: bytes) -> Message:
    """Return the units of one line without its terminator, in order; never raises."""
    if len(line) > MESSAGE_MAX:
        return (Broken(error=ScpiError(Err.INPUT_OVERRUN, f"more than {MESSAGE_MAX} characters")),)
    return tuple(_units(line.decode("latin-1")))


def _units(text: str) -> Iterator[Unit | Broken]:
    at, count = 0, 0
    place: tuple[str, ...] = ()
    while at < len(text):
        at = _space(text, at)
        if at >= len(text):
            return
        if text[at] == ";":
            at += 1
            continue
        count += 1
        if count > UNITS_MAX:
            yield Broken(error=ScpiError(Err.TOO_MUCH_DATA, f"more than {UNITS_MAX} commands in a line"))
            return
        try:
            unit, at, place = _unit(text, at, place)
        except ScpiError as error:
            yield Broken(error=error)
            found = text.find(";", at)
            at = len(text) if found < 0 else found + 1
        else:
            yield unit


def _space(text: str, at: int) -> int:
    match = _SPACE.match(text, at)
    return match.end() if match else at


def _unit(text: str, at: int, place: tuple[str, ...]) -> tuple[Unit, int, tuple[str, ...]]:
    """Read one unit; returns it, the position behind it, and the place from which the next header goes on."""
    match = _HEADER.match(text, at)
    if match is None:
        raise _unexpected(text, at)
    written, header, place = _header(match[1], place)
    query = match[2] is not None
    at = match.end()
    after = _space(text, at)
    if after < len(text) and text[after] != ";" and after == at:
        raise ScpiError(Err.HEADER_SEPARATOR, _shown(text[at:at + 12])) if text[at] < "\x7f" else _unexpected(text, at)
    params, after = _parameters(text, after)
    return Unit(header=header, written=written, query=query, params=params), after, place


def _header(written: str, place: tuple[str, ...]) -> tuple[tuple[str, ...], tuple[str, ...], tuple[str, ...]]:
    """The header as written, from the root, and the place of the next one."""
    mnemonics = tuple(written.upper().strip(":").split(":"))
    if any(len(mnemonic.lstrip("*").rstrip("0123456789")) > MNEMONIC_MAX for mnemonic in mnemonics):
        raise ScpiError(Err.MNEMONIC_TOO_LONG, _shown(written))
    if written.startswith("*"):
        return mnemonics, mnemonics, place
    header = mnemonics if written.startswith(":") else (*place, *mnemonics)
    if len(header) > NODES_MAX:
        raise ScpiError(Err.UNDEFINED_HEADER, _shown(written))
    return mnemonics, header, header[:-1]


def _parameters(text: str, at: int) -> tuple[tuple[Param, ...], int]:
    params: list[Param] = []
    if at >= len(text) or text[at] == ";":
        return (), at
    while True:
        param, at = _parameter(text, at)
        params.append(param)
        at = _space(text, at)
        if at >= len(text) or text[at] == ";":
            return tuple(params), at
        if text[at] != ",":
            raise _unexpected(text, at, Err.INVALID_SEPARATOR)
        if len(params) >= PARAMETERS_MAX:
            raise ScpiError(Err.TOO_MUCH_DATA, f"more than {PARAMETERS_MAX} parameters")
        at = _space(text, at + 1)
        if at >= len(text) or text[at] == ";":
            raise ScpiError(Err.SYNTAX, "nothing behind a comma")


def _parameter(text: str, at: int) -> tuple[Param, int]:
    first = text[at]
    if first in "+-.0123456789":
        return _number(text, at)
    if first in "\"'":
        return _string(text, at)
    if first == "#":
        return _sharp(text, at)
    if first == "(":
        raise ScpiError(Err.EXPRESSION_NOT_ALLOWED)
    match = _WORD.match(text, at)
    if match is None:
        raise _unexpected(text, at)
    if len(match[0]) > MNEMONIC_MAX:
        raise ScpiError(Err.CHARACTER_DATA_TOO_LONG, _shown(match[0]))
    return Param(kind=Kind.WORD, text=match[0].upper()), match.end()


def _number(text: str, at: int) -> tuple[Param, int]:
    match = _NUMBER.match(text, at)
    if match is None:
        raise ScpiError(Err.INVALID_IN_NUMBER, _shown(text[at:at + 12]))
    mantissa, exponent = match[1], match[2] or "0"
    if len(mantissa.lstrip("+-0.")) > DIGITS_MAX:
        raise ScpiError(Err.TOO_MANY_DIGITS)
    if len(exponent.lstrip("+-0")) > 5 or abs(int(exponent)) > EXPONENT_MAX:
        raise ScpiError(Err.EXPONENT_TOO_LARGE)
    end = match.end()
    suffix = _SUFFIX.match(text, end)
    unit = ""
    if suffix is not None:
        unit, end = suffix[1].upper(), suffix.end()
        if len(unit) > SUFFIX_MAX:
            raise ScpiError(Err.SUFFIX_TOO_LONG, _shown(unit))
    if end < len(text) and text[end] in ".+-_" and suffix is None:  # '1_000' and '1.2.3' are no numbers
        raise ScpiError(Err.INVALID_IN_NUMBER, _shown(text[at:end + 1]))
    return Param(kind=Kind.NUMBER, text=mantissa, exponent=int(exponent), suffix=unit), end


def _string(text: str, at: int) -> tuple[Param, int]:
    match = _STRING.match(text, at)
    if match is None:
        raise ScpiError(Err.INVALID_STRING, "no closing quote")
    quote = text[at]
    content = (match[1] if quote == '"' else match[2]).replace(quote * 2, quote)
    if any(c > "\x7e" for c in content):
        raise ScpiError(Err.INVALID_STRING, "not ASCII")
    return Param(kind=Kind.STRING, text=content), match.end()


def _sharp(text: str, at: int) -> tuple[Param, int]:
    match = _NON_DECIMAL.match(text, at)
    if match is None:
        if text[at + 1:at + 2].isdecimal():
            raise ScpiError(Err.BLOCK_NOT_ALLOWED)
        raise ScpiError(Err.INVALID_IN_NUMBER, _shown(text[at:at + 12]))
    value = next(int(digits, base) for digits, base in zip(match.groups(), _BASES, strict=True) if digits is not None)
    return Param(kind=Kind.NON_DECIMAL, text=str(value)), match.end()


def _unexpected(text: str, at: int, otherwise: Err = Err.SYNTAX) -> ScpiError:
    """The error for a character that cannot stand here: a stranger to the grammar, or a wrong place."""
    char = text[at]
    if char > "\x7e":
        return ScpiError(Err.INVALID_CHARACTER, f"character {ord(char)}")
    return ScpiError(otherwise, _shown(text[at:at + 12]))


def _shown(text: str) -> str:
    return "".join(c if " " <= c <= "~" else "?" for c in text[:40])
