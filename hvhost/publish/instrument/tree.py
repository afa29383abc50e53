"""The command tree: one table of patterns, from which long and short forms, optional nodes and the printed list follow.

A pattern is written as the standard writes it: ``[SOURce]:VOLTage[:LEVel]``.  Capitals are the short form; a node in
brackets may be left out; ``[1]`` behind a node allows the numeric suffix 1 (one channel: any other is -114).
"""

import re
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass
from itertools import product
from typing import Any

from hvhost.publish.instrument.errors import Err, ScpiError
from hvhost.publish.instrument.syntax import Param

Act = Callable[[Any, tuple[Param, ...]], Any]  # (session, parameters): an answer, None, or a wait

_NODE = re.compile(r"(\[)?:?([A-Z]+[a-z]*)(\[1\])?\]?")


@dataclass(frozen=True, slots=True, kw_only=True)
class Command:
    """One header: what its command form and its query form do; None where the standard's header has no such form.

    ``takes`` and ``asks`` describe the parameters of the two forms, ``most`` and ``most_asked`` count them and
    ``least`` is how many the command form needs.  ``stop`` says of parameters whether the command lowers with them
    (``cuts``: cuts): then it needs no seat and goes before everything queued.  ``overtakable`` is what a stop that
    came later must not be followed by.
    """

    pattern: str
    does: str
    act: Act | None = None
    query: Act | None = None
    takes: str = ""
    asks: str = ""
    least: int = 0
    most: int = 0
    most_asked: int = 0
    seat: bool = False
    stop: Callable[[tuple[Param, ...]], bool] | None = None
    cuts: bool = False
    overtakable: bool = False


@dataclass(frozen=True, slots=True)
class Node:
    """One mnemonic of a pattern."""

    long: str
    optional: bool
    numbered: bool

    @property
    def forms(self) -> tuple[str, ...]:
        """The short and the long form in capitals; one where they are the same."""
        short = "".join(c for c in self.long if c.isupper())
        return (short,) if short == self.long else (short, self.long.upper())


def short_form(long: str) -> str:
    """The short form by the standard's rule (SCPI-99 volume 1, 6.2.1): four letters, three before a vowel."""
    if len(long) <= 4:
        return long.upper()
    return (long[:3] if long[3].upper() in "AEIOU" else long[:4]).upper()


def nodes_of(pattern: str) -> tuple[Node, ...]:
    """The nodes of a pattern."""
    return tuple(Node(long, bool(opened), bool(numbered)) for opened, long, numbered in _NODE.findall(pattern))


def headers_of(pattern: str) -> Iterator[tuple[tuple[str, bool], ...]]:
    """Every way to write a pattern's header: (mnemonic, whether it may carry the suffix 1) from the root down."""
    if pattern.startswith("*"):
        yield ((pattern, False),)
        return
    choices = [[*((form, node.numbered) for form in node.forms), *([None] if node.optional else [])]
               for node in nodes_of(pattern)]
    for chosen in product(*choices):
        yield tuple(node for node in chosen if node is not None)


class Tree:
    """Finds commands by header."""

    def __init__(self, commands: Iterable[Command]) -> None:
        self.commands = tuple(commands)
        self._found: dict[tuple[str, ...], tuple[Command, tuple[bool, ...]]] = {}
        for command in self.commands:
            for header in headers_of(command.pattern):
                key = tuple(mnemonic for mnemonic, _ in header)
                if key in self._found:
                    raise ValueError(f"two commands are written {':'.join(key)}")
                self._found[key] = (command, tuple(numbered for _, numbered in header))

    def find(self, header: tuple[str, ...], *, query: bool) -> Command:
        """The command of a header in capitals; raises -113, or -114 for a suffix that no channel has."""
        bare = tuple(mnemonic.rstrip("0123456789") for mnemonic in header)
        found = self._found.get(bare)
        if found is None or (found[0].query if query else found[0].act) is None:
            raise ScpiError(Err.UNDEFINED_HEADER, ":".join(header)[:80])
        for mnemonic, plain, numbered in zip(header, bare, found[1], strict=True):
            if mnemonic != plain:
                if not numbered:
                    raise ScpiError(Err.UNDEFINED_HEADER, ":".join(header)[:80])
                if mnemonic != f"{plain}1":
                    raise ScpiError(Err.HEADER_SUFFIX, mnemonic[:40])
        return found[0]

    def has(self, header: tuple[str, ...], *, query: bool) -> bool:
        """Whether a header is known."""
        try:
            self.find(header, query=query)
        except ScpiError:
            return False
        return True


def check_count(command: Command, params: tuple[Param, ...], *, query: bool) -> None:
    """Raise -109 or -108 where there are too few or too many parameters."""
    least, most = (0, command.most_asked) if query else (command.least, command.most)
    if len(params) < least:
        raise ScpiError(Err.MISSING_PARAMETER)
    if len(params) > most:
        raise ScpiError(Err.PARAMETER_NOT_ALLOWED)


def listing(tree: Tree) -> str:
    """The whole tree as a table in Markdown: what both forms of each header take, who may, and what they do."""
    rows = [("header", "command takes", "query takes", "seat", "what it does"), ("---",) * 5]
    rows += [(f"`{command.pattern}`", _cell(command.act, command.takes), _cell(command.query, command.asks),
              "needed" if command.seat else "", command.does) for command in tree.commands]
    return "".join(f"| {' | '.join(cell.replace('|', chr(92) + '|') for cell in row)} |\n" for row in rows)


def _cell(form: Act | None, takes: str) -> str:
    return "no such form" if form is None else f"`{takes}`" if takes else "nothing"
