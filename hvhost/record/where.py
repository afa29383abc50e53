"""A closed filter language over the catalogue's columns: parsed strictly, never evaluated as code.

    expression  = term { "or" term }
    term        = factor { "and" factor }
    factor      = "not" factor | "(" expression ")" | comparison
    comparison  = column operator value
    operator    = "=" | "!=" | "<" | "<=" | ">" | ">=" | "~"       (~: contains, capitals count as small letters)
    value       = "none" | 'text in quotes' | a word | a number with its unit | a date or time

Example: ``verdict = fail and highest > 10 kV and opened >= 2027-01-15``.  A comparison with a value that a run does
not tell is false, except with ``none``.  A date is midnight UTC; a time is ISO 8601 with its offset.
"""

import re
from collections.abc import Callable
from dataclasses import dataclass
from datetime import UTC, datetime
from typing import Any

from hvhost.record.catalogue import RunSummary
from hvhost.words.errors import CommandRefused, QuantityFault
from hvhost.words.nearest import nearest_word
from hvhost.words.quantities import Dimension, parse_quantity

LONGEST, DEEPEST = 1_000, 20
Match = Callable[[RunSummary], bool]


@dataclass(frozen=True, slots=True)
class Column:
    """One column: the catalogue's field, and the dimension of a number (None: a text, 'time': a time)."""

    field: str
    dimension: Dimension | str | None = None


COLUMNS: dict[str, Column] = {
    "run": Column("run"), "kind": Column("kind"), "specimen": Column("specimen"), "order": Column("order"),
    "operator": Column("operator"), "plan": Column("plan"), "bench": Column("bench"), "outcome": Column("outcome"),
    "verdict": Column("verdict"), "delivery": Column("delivery"), "opened": Column("opened_utc_ns", "time"),
    "highest": Column("highest_v", Dimension.VOLT), "breakdown": Column("breakdown_v", Dimension.VOLT),
    "time_on": Column("time_on_s", Dimension.SECOND), "revisions": Column("revisions", Dimension.INTEGER),
}
OPERATORS = ("!=", "<=", ">=", "=", "<", ">", "~")
_TOKEN = re.compile(r"\s*(?:(?P<mark>!=|<=|>=|=|<|>|~|\(|\))|'(?P<quoted>[^']*)'|\"(?P<double>[^\"]*)\""
                    r"|(?P<word>[^\s()=<>!~'\"]+))")


@dataclass(frozen=True, slots=True)
class Token:
    """One piece of an expression: a mark, a word, or a text in quotes; ``at`` is its column in the text."""

    kind: str  # 'mark', 'word', 'text', 'end'
    text: str
    at: int


def where(expression: str) -> Match:
    """Return the test that an expression describes; raises `CommandRefused` naming the place of a fault."""
    if len(expression) > LONGEST or not expression.isprintable():
        raise CommandRefused(f"at most {LONGEST} printable characters", f"{len(expression)}", "--where")
    reader = _Reader(_tokens(expression))
    match = reader.expression(0)
    reader.need_end()
    return match


def _tokens(text: str) -> list[Token]:
    tokens, at = [], 0
    while text[at:].strip():
        found = _TOKEN.match(text, at)
        if found is None:
            raise CommandRefused("a column, a value, an operator or a bracket", repr(text[at:].strip()[:20]),
                                 f"--where, character {at + 1}", "put texts with such characters in quotes")
        kind = found.lastgroup or ""
        tokens.append(Token({"quoted": "text", "double": "text"}.get(kind, kind), found[kind], found.start(kind) + 1))
        at = found.end()
    return [*tokens, Token("end", "the end", len(text) + 1)]


class _Reader:
    """Recursive descent over the tokens, bounded in depth."""

    def __init__(self, tokens: list[Token]) -> None:
        self._tokens, self._at = tokens, 0

    @property
    def _next(self) -> Token:
        return self._tokens[self._at]

    def _take(self) -> Token:
        token = self._next
        self._at += 1
        return token

    def _is(self, kind: str, text: str) -> bool:
        if self._next.kind == kind and self._next.text == text:
            self._at += 1
            return True
        return False

    def need_end(self) -> None:
        """Raise where something is left."""
        if self._next.kind != "end":
            raise _fault("'and', 'or' or the end", self._next)

    def expression(self, depth: int) -> Match:
        """Terms joined by 'or'."""
        parts = [self._term(depth)]
        while self._is("word", "or"):
            parts.append(self._term(depth))
        return parts[0] if len(parts) == 1 else lambda run: any(part(run) for part in parts)

    def _term(self, depth: int) -> Match:
        parts = [self._factor(depth)]
        while self._is("word", "and"):
            parts.append(self._factor(depth))
        return parts[0] if len(parts) == 1 else lambda run: all(part(run) for part in parts)

    def _factor(self, depth: int) -> Match:
        if depth > DEEPEST:
            raise _fault(f"at most {DEEPEST} floors of brackets and 'not'", self._next)
        if self._is("word", "not"):
            inner = self._factor(depth + 1)
            return lambda run: not inner(run)
        if self._is("mark", "("):
            inside = self.expression(depth + 1)
            if not self._is("mark", ")"):
                raise _fault("')'", self._next)
            return inside
        return self._comparison()

    def _comparison(self) -> Match:
        name = self._take()
        column = COLUMNS.get(name.text) if name.kind == "word" else None
        if column is None:
            near = nearest_word(name.text, COLUMNS) if name.kind == "word" else ""
            raise _fault(f"a column, one of {', '.join(COLUMNS)}", name, f"did you mean '{near}'?" if near else "")
        operator = self._take()
        if operator.kind != "mark" or operator.text not in OPERATORS:
            raise _fault(f"an operator, one of {' '.join(OPERATORS)}", operator)
        return _comparison(column, operator, self._value())

    def _value(self) -> Token:
        """One value: a text in quotes, or the words up to the next keyword, mark or end ('12 kV')."""
        first = self._take()
        if first.kind == "text":
            return first
        if first.kind != "word":
            raise _fault("a value", first)
        words = [first.text]
        while self._next.kind == "word" and self._next.text not in ("and", "or", "not"):
            words.append(self._take().text)
        return Token("word", " ".join(words), first.at)


def _comparison(column: Column, operator: Token, value: Token) -> Match:
    if value.kind == "word" and value.text == "none":
        if operator.text not in ("=", "!="):
            raise _fault("= or != before none", operator)
        wanted = operator.text == "="
        return lambda run: (getattr(run, column.field) in (None, "")) is wanted
    if operator.text == "~":
        if column.dimension is not None:
            raise _fault("a column of text before ~", operator)
        part = value.text.casefold()
        return lambda run: part in str(getattr(run, column.field)).casefold()
    right = _read(column, value)
    test = _TESTS[operator.text]

    def match(run: RunSummary) -> bool:
        left = getattr(run, column.field)
        return left is not None and test(left, right)

    return match


_TESTS: dict[str, Callable[[Any, Any], bool]] = {
    "=": lambda a, b: bool(a == b), "!=": lambda a, b: bool(a != b), "<": lambda a, b: bool(a < b),
    "<=": lambda a, b: bool(a <= b), ">": lambda a, b: bool(a > b), ">=": lambda a, b: bool(a >= b)}


def _read(column: Column, value: Token) -> str | float | int:
    if column.dimension is None:
        return value.text
    if not isinstance(column.dimension, Dimension):
        return _time(value)
    try:
        return parse_quantity(value.text, column.dimension)
    except QuantityFault as fault:
        raise CommandRefused(fault.expected, fault.found, f"--where, character {value.at}", fault.remedy) from None


def _time(value: Token) -> int:
    expected = "a date such as 2027-01-15, or a time such as 2027-01-15T08:00:00+01:00"
    form = r"[0-9]{4}-[0-9]{2}-[0-9]{2}(T[0-9]{2}:[0-9]{2}(:[0-9]{2})?(Z|[+-][0-9]{2}:[0-9]{2}))?"
    if re.fullmatch(form, value.text, re.ASCII) is None:
        raise _fault(expected, value)
    try:
        moment = datetime.fromisoformat(value.text)
    except ValueError:
        raise _fault(expected, value) from None
    moment = moment if moment.tzinfo is not None else moment.replace(tzinfo=UTC)
    return int(moment.timestamp()) * 1_000_000_000


def _fault(expected: str, found: Token, remedy: str = "") -> CommandRefused:
    shown = found.text if found.kind == "end" else repr(found.text)[:60]
    return CommandRefused(expected, shown, f"--where, character {found.at}", remedy)
