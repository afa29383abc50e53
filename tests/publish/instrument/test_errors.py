"""The error table beside the standard's facts, and the queue."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.publish.instrument.errors import QUEUE_LIMIT, TEXT_MAX, TEXTS, Entry, Err, ErrorQueue, esr_bit, quoted

# SCPI-99 volume 2, chapter 21.8: numbers and texts as two independent libraries have them (-300: the standard's own
# spelling with a hyphen, from memory; the two write it without and differ).
FACTS = {
    0: "No error", -101: "Invalid character", -102: "Syntax error", -103: "Invalid separator", -104: "Data type error",
    -108: "Parameter not allowed", -109: "Missing parameter", -111: "Header separator error",
    -112: "Program mnemonic too long", -113: "Undefined header", -114: "Header suffix out of range",
    -121: "Invalid character in number", -123: "Exponent too large", -124: "Too many digits",
    -128: "Numeric data not allowed", -131: "Invalid suffix", -134: "Suffix too long", -138: "Suffix not allowed",
    -141: "Invalid character data", -144: "Character data too long", -148: "Character data not allowed",
    -151: "Invalid string data", -158: "String data not allowed", -168: "Block data not allowed",
    -178: "Expression data not allowed", -200: "Execution error", -203: "Command protected", -221: "Settings conflict",
    -222: "Data out of range", -223: "Too much data", -224: "Illegal parameter value", -230: "Data corrupt or stale",
    -240: "Hardware error", -241: "Hardware missing", -300: "Device-specific error", -330: "Self-test failed",
    -350: "Queue overflow", -363: "Input buffer overrun", -430: "Query DEADLOCKED",
}


def test_numbers_and_texts_are_the_standards() -> None:
    """Every number that this instrument gives has the standard's text, and no other number is given."""
    assert {int(number): text for number, text in TEXTS.items()} == FACTS
    assert {int(number) for number in Err} == set(FACTS)


@pytest.mark.parametrize(("number", "bit"), [
    (-100, 5), (-113, 5), (-199, 5), (-200, 4), (-222, 4), (-300, 3), (-350, 3), (1, 3), (32_767, 3), (-400, 2),
    (-430, 2), (-500, 7), (-600, 6), (-700, 1), (-800, 0), (0, None)])
def test_the_class_of_a_number_sets_the_standards_event_bit(number: int, bit: int | None) -> None:
    """Command errors bit 5, execution 4, device 3, query 2, power on 7, user request 6, control 1, complete 0."""
    assert esr_bit(number) == bit


def test_errors_come_out_in_order_and_then_there_is_none() -> None:
    """The queue is first in, first out; empty it answers 0."""
    queue = ErrorQueue()
    queue.push(Err.UNDEFINED_HEADER, "VOLTA")
    queue.push(Err.OUT_OF_RANGE)
    assert len(queue) == 2
    assert [queue.next().text for _ in range(3)] == [
        '-113,"Undefined header;VOLTA"', '-222,"Data out of range"', '0,"No error"']


def test_on_overflow_the_last_entry_becomes_queue_overflow() -> None:
    """The first errors stay, since they tell most; the last place says that more was lost."""
    queue = ErrorQueue(limit=3)
    for number in (Err.SYNTAX, Err.DATA_TYPE, Err.CONFLICT, Err.OUT_OF_RANGE, Err.EXECUTION):
        queue.push(number)
    assert [queue.next().number for _ in range(4)] == [Err.SYNTAX, Err.DATA_TYPE, Err.QUEUE_OVERFLOW, Err.NONE]


def test_clearing_forgets_everything() -> None:
    """*CLS empties the queue."""
    queue = ErrorQueue()
    queue.push(Err.SYNTAX)
    queue.clear()
    assert len(queue) == 0


@given(st.lists(st.sampled_from(list(Err)), max_size=200))
def test_the_queue_never_grows_beyond_its_limit(pushed: list[Err]) -> None:
    """However many errors come, memory stays bounded and the first ones stay."""
    queue = ErrorQueue()
    for number in pushed:
        queue.push(number)
    assert len(queue) == min(len(pushed), QUEUE_LIMIT)
    if 0 < len(pushed) <= QUEUE_LIMIT:
        assert [queue.next().number for _ in pushed] == pushed


@given(st.text(max_size=400))
def test_an_error_is_one_printable_line_whatever_it_tells(information: str) -> None:
    """Quotes are doubled, newlines and strangers masked, the length bounded: nobody forges an answer with a name."""
    text = Entry(Err.CONFLICT, information).text
    assert text.isascii()
    assert text.isprintable()
    content = text.partition(",")[2]
    assert content.startswith('"')
    assert content.endswith('"')
    inside = content[1:-1]
    assert '"' not in inside.replace('""', "")
    assert len(inside.replace('""', '"')) <= TEXT_MAX


def test_quotes_inside_a_string_are_doubled() -> None:
    """IEEE 488.2, 8.7.8: string response data."""
    assert quoted('say "no"') == '"say ""no"""'
