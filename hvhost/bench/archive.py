"""The bench file's section ``archive``: where a closed run's row goes, and which command is told of it.

For each run that closes, one small CSV file with a header and one row is written whole and then renamed into
``results``; its name holds order, specimen and run.  ``command`` is run once for each such file, apart from the
daemon, as a list of words without a shell, with the file's path as its last word.  Without the section nothing
leaves the runs folder.
"""

import re
from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING, Annotated, Any

from pydantic import BeforeValidator, WithJsonSchema

from hvhost.bench.saying import REFUSE, Say
from hvhost.words.fields import Block, Line, YesNo, fault, matching, quantity, schema_of
from hvhost.words.findings import Finding
from hvhost.words.quantities import Dimension

if TYPE_CHECKING:
    from hvhost.bench.document import BenchFile

WORDS_MAX = 16
DECIMALS = {"point": ".", "comma": ","}
SEPARATORS = {"comma": ",", "semicolon": ";", "tab": "\t"}
ZONE = r"[A-Za-z][A-Za-z0-9_+-]{0,31}(/[A-Za-z0-9_+-]{1,31}){0,2}"
_LIMIT_S = (1.0, 3600.0)

FolderPath = Annotated[str, *matching(r"/[^\x00-\x1f\x7f]{1,199}", "a whole path such as '/srv/results'", 200)]


@dataclass(frozen=True, slots=True, kw_only=True)
class Archive:
    """Where results go: a folder by its whole path, the form of the CSV, and the command if there is one."""

    results: str
    decimal: str = "."
    separator: str = ","
    zone: str = "UTC"
    command: tuple[str, ...] = ()
    command_limit_s: float = 60.0
    rehearsals: bool = False


def _one_of(words: dict[str, str]) -> tuple[BeforeValidator, WithJsonSchema]:
    expected = " or ".join(words)

    def validate(value: Any) -> str:
        if not isinstance(value, str) or value not in words:
            raise fault(expected)
        return value

    return BeforeValidator(validate), WithJsonSchema({"type": "string", "enum": list(words)})


class ArchiveBlock(Block):
    """The results of closed runs: a folder for one CSV file a run, its form, and a command that is told of each."""

    results: FolderPath
    decimal: Annotated[str, *_one_of(DECIMALS)] = "point"
    separator: Annotated[str, *_one_of(SEPARATORS)] = "comma"
    zone: Annotated[str, *matching(ZONE, "a time zone such as 'Europe/Berlin' or 'UTC'", 64)] = "UTC"
    command: tuple[Line, ...] = ()
    command_limit: Annotated[float, quantity(Dimension.SECOND, low=_LIMIT_S[0], high=_LIMIT_S[1]),
                             schema_of(Dimension.SECOND)] = 60.0
    rehearsals: YesNo = False


def archive_of(block: ArchiveBlock | None) -> Archive | None:
    """The frozen section, None where the file has none."""
    if block is None:
        return None
    return Archive(results=block.results, decimal=DECIMALS[block.decimal], separator=SEPARATORS[block.separator],
                   zone=block.zone, command=block.command, command_limit_s=block.command_limit,
                   rehearsals=block.rehearsals)


def check_archive(b: "BenchFile", say: Say) -> Iterator[Finding]:
    """The CSV must be readable again, and the command must be one file that no search path decides about."""
    block = b.archive
    if block is None:
        return
    if DECIMALS[block.decimal] == SEPARATORS[block.separator]:
        yield say(REFUSE, "archive.separator", "another character than the decimal mark", f"'{block.separator}'",
                  "a decimal comma goes with a semicolon or a tab")
    if len(block.command) > WORDS_MAX:
        yield say(REFUSE, "archive.command", f"at most {WORDS_MAX} words", f"{len(block.command)}")
    if block.command and re.match(r"/[^/]", block.command[0]) is None:
        yield say(REFUSE, "archive.command", "a program by its whole path, such as '/usr/local/bin/import-result'",
                  f"'{block.command[0]}'", "it is run without a shell and without a search path")
