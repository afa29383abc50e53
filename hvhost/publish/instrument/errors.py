"""The standard's errors: numbers and texts (SCPI-99 volume 2, chapter 21.8), their event-status bits, and the queue.

The class of a number decides which bit of the standard event status register it sets (IEEE 488.2, 11.5.1): command
errors -1xx bit 5, execution errors -2xx bit 4, device-specific errors -3xx and positive numbers bit 3, query errors
-4xx bit 2, and the four single events below.
"""

from collections import deque
from dataclasses import dataclass
from enum import IntEnum

QUEUE_LIMIT = 32
TEXT_MAX = 255  # characters of text and information together (SCPI-99 21.8.1)


class Err(IntEnum):
    """The numbers that this instrument gives."""

    NONE = 0
    INVALID_CHARACTER = -101
    SYNTAX = -102
    INVALID_SEPARATOR = -103
    DATA_TYPE = -104
    PARAMETER_NOT_ALLOWED = -108
    MISSING_PARAMETER = -109
    HEADER_SEPARATOR = -111
    MNEMONIC_TOO_LONG = -112
    UNDEFINED_HEADER = -113
    HEADER_SUFFIX = -114
    INVALID_IN_NUMBER = -121
    EXPONENT_TOO_LARGE = -123
    TOO_MANY_DIGITS = -124
    NUMERIC_NOT_ALLOWED = -128
    INVALID_SUFFIX = -131
    SUFFIX_TOO_LONG = -134
    SUFFIX_NOT_ALLOWED = -138
    INVALID_CHARACTER_DATA = -141
    CHARACTER_DATA_TOO_LONG = -144
    CHARACTER_DATA_NOT_ALLOWED = -148
    INVALID_STRING = -151
    STRING_NOT_ALLOWED = -158
    BLOCK_NOT_ALLOWED = -168
    EXPRESSION_NOT_ALLOWED = -178
    EXECUTION = -200
    PROTECTED = -203
    CONFLICT = -221
    OUT_OF_RANGE = -222
    TOO_MUCH_DATA = -223
    ILLEGAL_VALUE = -224
    STALE = -230
    HARDWARE = -240
    HARDWARE_MISSING = -241
    DEVICE = -300
    SELF_TEST = -330
    QUEUE_OVERFLOW = -350
    INPUT_OVERRUN = -363
    DEADLOCKED = -430


TEXTS: dict[Err, str] = {
    Err.NONE: "No error",
    Err.INVALID_CHARACTER: "Invalid character",
    Err.SYNTAX: "Syntax error",
    Err.INVALID_SEPARATOR: "Invalid separator",
    Err.DATA_TYPE: "Data type error",
    Err.PARAMETER_NOT_ALLOWED: "Parameter not allowed",
    Err.MISSING_PARAMETER: "Missing parameter",
    Err.HEADER_SEPARATOR: "Header separator error",
    Err.MNEMONIC_TOO_LONG: "Program mnemonic too long",
    Err.UNDEFINED_HEADER: "Undefined header",
    Err.HEADER_SUFFIX: "Header suffix out of range",
    Err.INVALID_IN_NUMBER: "Invalid character in number",
    Err.EXPONENT_TOO_LARGE: "Exponent too large",
    Err.TOO_MANY_DIGITS: "Too many digits",
    Err.NUMERIC_NOT_ALLOWED: "Numeric data not allowed",
    Err.INVALID_SUFFIX: "Invalid suffix",
    Err.SUFFIX_TOO_LONG: "Suffix too long",
    Err.SUFFIX_NOT_ALLOWED: "Suffix not allowed",
    Err.INVALID_CHARACTER_DATA: "Invalid character data",
    Err.CHARACTER_DATA_TOO_LONG: "Character data too long",
    Err.CHARACTER_DATA_NOT_ALLOWED: "Character data not allowed",
    Err.INVALID_STRING: "Invalid string data",
    Err.STRING_NOT_ALLOWED: "String data not allowed",
    Err.BLOCK_NOT_ALLOWED: "Block data not allowed",
    Err.EXPRESSION_NOT_ALLOWED: "Expression data not allowed",
    Err.EXECUTION: "Execution error",
    Err.PROTECTED: "Command protected",
    Err.CONFLICT: "Settings conflict",
    Err.OUT_OF_RANGE: "Data out of range",
    Err.TOO_MUCH_DATA: "Too much data",
    Err.ILLEGAL_VALUE: "Illegal parameter value",
    Err.STALE: "Data corrupt or stale",
    Err.HARDWARE: "Hardware error",
    Err.HARDWARE_MISSING: "Hardware missing",
    Err.DEVICE: "Device-specific error",
    Err.SELF_TEST: "Self-test failed",
    Err.QUEUE_OVERFLOW: "Queue overflow",
    Err.INPUT_OVERRUN: "Input buffer overrun",
    Err.DEADLOCKED: "Query DEADLOCKED",
}

_CLASS_BITS = {1: 5, 2: 4, 3: 3, 4: 2, 5: 7, 6: 6, 7: 1, 8: 0}


def esr_bit(number: int) -> int | None:
    """The event-status bit that an error of this number sets; None for 'no error'."""
    if number == 0:
        return None
    return 3 if number > 0 else _CLASS_BITS.get(-number // 100)


class ScpiError(Exception):
    """One error of the standard, with information of ours; whoever sends commands reads it from the queue."""

    def __init__(self, number: Err, information: str = "") -> None:
        self.number, self.information = number, information
        super().__init__(f"{number.value} {information}")


@dataclass(frozen=True, slots=True)
class Entry:
    """One line of the queue."""

    number: Err
    information: str = ""

    @property
    def text(self) -> str:
        """As it is answered: number, then text and information in one string of the standard."""
        told = TEXTS[self.number]
        return f"{self.number.value},{quoted(f'{told};{self.information}' if self.information else told)}"


class ErrorQueue:
    """First in, first out, bounded: what comes after the last place replaces it by 'queue overflow' (21.8.1)."""

    def __init__(self, limit: int = QUEUE_LIMIT) -> None:
        self._limit = limit
        self._entries: deque[Entry] = deque()

    def __len__(self) -> int:
        return len(self._entries)

    def push(self, number: Err, information: str = "") -> None:
        """Add an error; the queue never grows beyond its limit."""
        if len(self._entries) >= self._limit:
            self._entries[-1] = Entry(Err.QUEUE_OVERFLOW)
        else:
            self._entries.append(Entry(number, information))

    def next(self) -> Entry:
        """Take the oldest error; 'no error' where there is none."""
        return self._entries.popleft() if self._entries else Entry(Err.NONE)

    def clear(self) -> None:
        """Forget all of them."""
        self._entries.clear()


def quoted(text: str) -> str:
    """A string of the standard: printable ASCII in double quotes, quotes inside doubled, bounded."""
    plain = "".join(c if " " <= c <= "~" else "?" for c in text[:TEXT_MAX])
    return '"' + plain.replace('"', '""') + '"'
