"""The kinds of field that a body may hold: how each is read, strictly, and written (PROTOCOL.md section 3)."""

from collections.abc import Callable
from typing import Any

from hvhost.words.errors import WireFault

U32 = 0xFFFFFFFF
I32 = 0x7FFFFFFF


def integer(low: int, high: int) -> Callable[[str], int]:
    """Return the reader of decimal numbers in a range."""

    def read(text: str) -> int:
        digits = text[1:] if text[:1] == "-" else text
        if not (digits.isascii() and digits.isdigit()) or len(digits) > 10 or text == "-0":
            raise WireFault("a decimal integer", repr(text))
        if digits[0] == "0" and len(digits) > 1:
            raise WireFault("no leading zero", repr(text))
        value = int(text)
        if not low <= value <= high:
            raise WireFault(f"{low} to {high}", text)
        return value

    return read


def hexadecimal(text: str) -> int:
    """Read eight upper-case hexadecimal digits."""
    if len(text) != 8 or not set(text) <= set("0123456789ABCDEF"):
        raise WireFault("eight upper-case hexadecimal digits", repr(text))
    return int(text, 16)


def word(text: str) -> str:
    """Read a lower-case word of letters and digits."""
    if not text.isascii() or not text.isalnum() or not text.islower():
        raise WireFault("a lower-case word", repr(text))
    return text


u32, i32, u16, flag = integer(0, U32), integer(-I32 - 1, I32), integer(0, 65535), integer(0, 1)


def _dec(value: Any) -> str:
    return str(value)


def _hex8(value: Any) -> str:
    return f"{value:08X}"


Kind = tuple[Callable[[str], Any], Callable[[Any], str]]
NUMBER: Kind = (u32, _dec)
SIGNED: Kind = (i32, _dec)
CODE: Kind = (u16, _dec)
FLAG: Kind = (flag, _dec)
HEX8: Kind = (hexadecimal, _hex8)
WORD: Kind = (word, _dec)
VALUE: Kind = (integer(-U32, U32), _dec)
