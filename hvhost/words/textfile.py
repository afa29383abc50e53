"""A text file read as a model: every fault in one go, each with its line and the nearest right word.

``read_model`` lays a pydantic model over the tree of ``yamltree`` and turns every error into a Finding with file, line,
expected and found.
"""

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Generic, TypeVar, cast

from pydantic import BaseModel, ValidationError

from hvhost.words.errors import FileFault
from hvhost.words.findings import Finding, Grade
from hvhost.words.modelpaths import known_keys, partial_of
from hvhost.words.nearest import nearest_word
from hvhost.words.quantities import shown
from hvhost.words.yamltree import LARGEST, Node, Place, named, read_yaml

__all__ = ["Node", "Place", "Reading", "read_model", "read_text", "read_yaml"]

MOST_FAULTS = 200  # a file of garbage is said to be one


def read_text(path: Path) -> str:
    """The text of a file; raises FileFault with the remedy where it cannot be read or is not UTF-8."""
    try:
        with path.open("rb") as file:
            data = file.read(LARGEST * 4 + 1)
    except OSError as error:
        raise _unreadable(path, "a readable file", error.strerror or str(error)) from error
    if len(data) > LARGEST * 4:
        raise _unreadable(path, f"at most {LARGEST // 1024} KiB", f"more than {LARGEST * 4 // 1024} KiB")
    try:
        return data.decode("utf-8")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        found = f"byte 0x{data[error.start]:02X}"
        raise _unreadable(path, "text in UTF-8", found, line, "save the file as UTF-8") from error


def _unreadable(path: Path, expected: str, found: str, line: int = 0, remedy: str = "") -> FileFault:
    finding = Finding(grade=Grade.REFUSE, file=path.name, line=line, what="file", expected=expected, found=found,
                      remedy=remedy)
    place = f"{path}:{line}" if line else str(path)
    return FileFault(expected, found, place, remedy, findings=(finding,))


M = TypeVar("M", bound=BaseModel)


@dataclass(frozen=True, slots=True, kw_only=True)
class Reading(Generic[M]):
    """What became of a file: the model where every field was right, the faults, and the tree for line numbers.

    ``partial`` has the model's attributes as far as they were right; touching one that was not raises ``Absent``.
    So checks across fields run on it whether or not other fields are at fault.
    """

    file: str
    model: M | None
    partial: M
    root: Node
    findings: tuple[Finding, ...]

    def line_of(self, *place: str | int) -> int:
        """The line of a value, or of the block where it is missing."""
        return self.root.line_of(*place)


def read_model(model: type[M], file: str, text: str) -> Reading[M]:
    """Read ``text`` as ``model``; never raises for bad content."""
    root, faults = read_yaml(file, text)
    if root is None:
        empty = Node(0, 0, entries={})
        return Reading(file=file, model=None, partial=cast(M, partial_of(model, {})), root=empty, findings=faults)
    data = root.plain()
    try:
        whole = model.model_validate(data, strict=True)
    except ValidationError as error:
        found = tuple(_findings_of(error, model, file, root))
        every = sorted({*faults, *found}, key=lambda f: (f.line, f.what, f.found))
        if len(every) > MOST_FAULTS:
            every = [*every[:MOST_FAULTS], Finding(grade=Grade.REFUSE, file=file, line=every[MOST_FAULTS].line,
                                                   what="file", expected="a file of this kind",
                                                   found=f"{len(every) - MOST_FAULTS} more faults from here on")]
        return Reading(file=file, model=None, partial=cast(M, partial_of(model, data)), root=root,
                       findings=tuple(every))
    return Reading(file=file, model=None if faults else whole, partial=whole, root=root, findings=faults)


def _findings_of(error: ValidationError, model: type[BaseModel], file: str, root: Node) -> Iterator[Finding]:
    for item in error.errors(include_url=False):
        place = tuple(item["loc"])
        if root.at(place).told:
            continue
        yield _finding(item, place, model, file, root)


def _finding(item: Mapping[str, Any], place: Place, model: type[BaseModel], file: str, root: Node) -> Finding:
    kind, context = str(item["type"]), item.get("ctx") or {}
    node = root.at(place)
    what = named(place)
    expected, found, remedy = _EXPECTED.get(kind, _other)(item, context, node)
    if place[-1:] == ("[key]",):  # a key that the file chose is wrong, not what stands under it
        what, found = named(place[:-1]), shown(str(place[-2]))
    if kind == "extra_forbidden":
        keys = known_keys(model, place[:-1])
        word = str(place[-1])
        near = nearest_word(word, keys)
        expected = f"one of {', '.join(sorted(keys))}" if len(keys) <= 8 else "a known key"
        found, remedy = shown(word), f"did you mean '{near}'?" if near else ""
        if not near and len(keys) > 8:
            remedy = f"known here: {', '.join(sorted(keys))}"
    line = node.key_line if kind == "missing" or node.text is None else node.line
    return Finding(grade=Grade.REFUSE, file=file, line=line, what=what, expected=expected, found=found, remedy=remedy)


_Told = tuple[str, str, str]


def _other(item: Mapping[str, Any], context: Mapping[str, Any], node: Node) -> _Told:
    message = str(item["msg"])
    message = message.removeprefix("Input should be ").removeprefix("Value error, ")
    return message, node.described(), ""


def _own(item: Mapping[str, Any], context: Mapping[str, Any], node: Node) -> _Told:
    return str(context.get("expected", "")), str(context.get("found") or node.described()), str(
        context.get("remedy", ""))


def _fixed(expected: str) -> Callable[[Mapping[str, Any], Mapping[str, Any], Node], _Told]:
    return lambda item, context, node: (expected, node.described(), "")


def _missing(item: Mapping[str, Any], context: Mapping[str, Any], node: Node) -> _Told:
    return f"the key '{item['loc'][-1]}'", "nothing", ""


def _literal(item: Mapping[str, Any], context: Mapping[str, Any], node: Node) -> _Told:
    expected = str(context.get("expected", "")).replace("'", "")
    near = nearest_word(node.text or "", expected.replace(" or ", ", ").split(", "))
    return f"one of {expected}", node.described(), f"did you mean '{near}'?" if near else ""


_EXPECTED: dict[str, Callable[[Mapping[str, Any], Mapping[str, Any], Node], _Told]] = {
    "hvhost": _own,
    "missing": _missing,
    "literal_error": _literal,
    "extra_forbidden": _fixed("a known key"),
    "model_type": _fixed("a block of keys"),
    "model_attributes_type": _fixed("a block of keys"),
    "dict_type": _fixed("a block of keys"),
    "tuple_type": _fixed("a list"),
    "list_type": _fixed("a list"),
    "string_type": _fixed("a text"),
}
