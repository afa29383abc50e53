"""YAML as a tree of texts with line numbers.

YAML's guesses are switched off: each scalar stays the text that was typed (``10:30``, ``on``, ``012`` and ``1e3`` mean
nothing by themselves).  Duplicate keys, anchors, aliases, merges, tags, directives and further documents are faults,
as are depth and size beyond any honest file.  Reading is by the parser's events, so nothing recurses.
"""

import unicodedata
from dataclasses import dataclass, field
from typing import Any

import yaml

from hvhost.words.findings import Finding, Grade
from hvhost.words.quantities import shown

LARGEST = 256 * 1024  # characters; the parser's time grows with it
DEEPEST = 24  # nested blocks

Place = tuple[str | int, ...]


def named(place: Place) -> str:
    """A place as messages name it, 'steps.2.hold': list places count from 1; keys printable and short."""
    parts = [f"{part + 1}" if isinstance(part, int) else "".join(c if c.isprintable() else "?" for c in part[:40])
             for part in place]
    return ".".join(parts) or "file"


@dataclass(slots=True)
class Node:
    """One value of the file: a text, a list or a block of keys; lines count from 1."""

    line: int
    key_line: int
    text: str | None = None
    told: bool = False  # a fault of form about this value has been told; no second one is
    items: list["Node"] | None = None
    entries: dict[str, "Node"] | None = None

    def plain(self) -> Any:
        """Texts, tuples and dicts, as a model takes them."""
        if self.entries is not None:
            return {key: node.plain() for key, node in self.entries.items()}
        if self.items is not None:
            return tuple(node.plain() for node in self.items)
        return self.text

    def at(self, place: Place) -> "Node":
        """The node at a place, or the deepest one that exists on the way; parts that are no key are passed over."""
        node = self
        for part in place:
            if node.entries is not None and part in node.entries:
                node = node.entries[str(part)]
            elif node.items is not None and isinstance(part, int) and part < len(node.items):
                node = node.items[part]
        return node

    def has(self, place: Place) -> bool:
        """Whether the last part of the place is a key of the node before it."""
        parent = self.at(place[:-1])
        return parent.entries is not None and place[-1] in parent.entries

    def line_of(self, *place: str | int) -> int:
        """The line where the value at a place was written, or that of the nearest block around it."""
        return self.at(place).key_line

    def described(self) -> str:
        """What a message says was found."""
        if self.entries is not None:
            return "a block of keys"
        if self.items is not None:
            return "a list"
        return shown(self.text) if self.text else "nothing"


@dataclass(slots=True)
class _Open:
    """A block or list being read."""

    node: Node
    key: str | None = None
    key_line: int = 0
    lost: int = 0  # numbers keys that are no text, so that their values are read all the same


@dataclass(slots=True)
class _Reader:
    """Turns the parser's events into nodes, noting faults as it goes."""

    file: str
    findings: list[Finding] = field(default_factory=list)
    root: Node | None = None
    stack: list[_Open] = field(default_factory=list)
    documents: int = 0

    def fault(self, line: int, what: str, expected: str, found: str, remedy: str = "") -> None:
        self.findings.append(Finding(grade=Grade.REFUSE, file=self.file, line=line, what=what, expected=expected,
                                     found=found, remedy=remedy))

    def take(self, event: yaml.Event) -> bool:
        """Take one event; False ends the reading."""
        line = event.start_mark.line + 1 if event.start_mark else 0
        self._check_extras(event, line)
        if isinstance(event, yaml.DocumentStartEvent):
            return self._document(event, line)
        if isinstance(event, yaml.AliasEvent):
            self._add(Node(line, line, text="", told=True), "")
        elif isinstance(event, yaml.ScalarEvent):
            self._add(Node(line, line, text=event.value), event.value, plain=event.style is None)
        elif isinstance(event, yaml.MappingStartEvent):
            self._open(Node(line, line, entries={}))
        elif isinstance(event, yaml.SequenceStartEvent):
            self._open(Node(line, line, items=[]))
        elif isinstance(event, yaml.CollectionEndEvent):
            self.stack.pop()
        if len(self.stack) > DEEPEST:
            self.fault(line, "nesting", f"at most {DEEPEST} blocks inside each other", "more")
            return False
        return True

    def _check_extras(self, event: yaml.Event, line: int) -> None:
        anchor = getattr(event, "anchor", None)
        if anchor and isinstance(event, yaml.AliasEvent):
            self.fault(line, "alias", "the value written out", f"'*{anchor}'")
        elif anchor:
            self.fault(line, "anchor", "a plain value", f"'&{anchor}'")
        tag = getattr(event, "tag", None)
        if tag:
            self.fault(line, "tag", "a plain value", shown(str(tag).replace("tag:yaml.org,2002:", "!!")))

    def _document(self, event: yaml.DocumentStartEvent, line: int) -> bool:
        self.documents += 1
        if event.version or event.tags:
            self.fault(line, "directive", "no line that begins with '%'", "a directive")
        if self.documents > 1:
            self.fault(line, "document", "one document in the file", "another one after '---'")
        return self.documents == 1

    def _open(self, node: Node) -> None:
        self._add(node, None)
        self.stack.append(_Open(node))

    def _add(self, node: Node, key: str | None, plain: bool = False) -> None:
        """Put a node where it belongs: as root, list item, key or value."""
        if not self.stack:
            self.root = node
            return
        top = self.stack[-1]
        if top.node.items is not None:
            top.node.items.append(node)
        elif top.key is None:
            self._key(top, node, key, plain)
        elif top.node.entries is not None:
            node.key_line = top.key_line
            top.node.entries.setdefault(top.key, node)
            top.key = None

    def _key(self, top: _Open, node: Node, key: str | None, plain: bool) -> None:
        entries = top.node.entries or {}
        if key is None or key in entries or (key == "<<" and plain):
            if key is None:
                self.fault(node.line, "key", "a word", node.described())
            elif key == "<<" and key not in entries:
                self.fault(node.line, "merge", "keys written out", "'<<'")
            else:
                first = entries[key].key_line
                self.fault(node.line, named((key,)), "each key once", f"{shown(key)} again (first on line {first})")
            top.lost += 1
            top.key = f"\0lost {top.lost}"
        else:
            top.key = key
        top.key_line = node.line


def read_yaml(name: str, text: str) -> tuple[Node | None, tuple[Finding, ...]]:
    """Return the tree (None where the text is no YAML block of keys) and every fault of form."""
    reader = _Reader(name)
    if len(text) > LARGEST:
        reader.fault(0, "size", f"at most {LARGEST // 1024} KiB", f"{len(text) // 1024} KiB")
        return None, tuple(reader.findings)
    text = text.removeprefix("\ufeff")
    _check_characters(reader, text)
    try:
        for event in yaml.parse(text, Loader=yaml.SafeLoader):
            if not reader.take(event):
                break
        if len(reader.stack) > DEEPEST:
            return None, tuple(reader.findings)  # half a tree would be called incomplete
    except yaml.MarkedYAMLError as error:
        _syntax_fault(reader, error)
        return None, tuple(reader.findings)
    except yaml.YAMLError:
        if not reader.findings:
            reader.fault(0, "text", "readable YAML", "something else")
        return None, tuple(reader.findings)
    root = reader.root
    if root is None or root.entries is None:
        found = "an empty file" if root is None or root.text == "" else root.described()
        reader.fault(root.line if root else 0, "file", "a block of keys, 'key: value' on each line", found)
        return None, tuple(reader.findings)
    _drop_lost(root)
    return root, tuple(reader.findings)


def _drop_lost(node: Node) -> None:
    """Forget values whose key was a fault: they have been told."""
    pending = [node]
    while pending:
        current = pending.pop()
        if current.entries is not None:
            for key in [k for k in current.entries if k.startswith("\0")]:
                del current.entries[key]
        pending.extend((current.entries or {}).values())
        pending.extend(current.items or [])


# Control and format characters, line and paragraph separators: what an editor does not show but YAML or a reader obeys.
_UNSEEN = frozenset({"Cc", "Cf", "Zl", "Zp", "Cs"})


def _check_characters(reader: _Reader, text: str) -> None:
    """Tabs in the indentation and control characters, each with its line."""
    for number, line in enumerate(text.split("\n"), start=1):
        indent = line[: len(line) - len(line.lstrip())]
        if "\t" in indent and line.strip():
            reader.fault(number, "indentation", "spaces", "a tab")
        odd = next((c for c in line.rstrip("\r") if unicodedata.category(c) in _UNSEEN and c != "\t"), None)
        if odd is not None:
            reader.fault(number, "text", "visible characters", f"control character U+{ord(odd):04X}")


# The parser's problem -> what is expected, what was found, the remedy.
_PROBLEMS: dict[str, tuple[str, str, str]] = {
    "mapping values are not allowed here": (
        "one 'key: value' on a line, indented like its neighbours", "a second ': ', or a key indented too far",
        "a text with ': ' in it needs quotes"),
    "found unexpected end of stream": ("a closing quote", "the end of the file", ""),
    "could not find expected ':'": ("'key: value'", "a line without ': '", ""),
    "expected <block end>, but found '<block mapping start>'": (
        "a key indented like its neighbours", "a key indented otherwise", ""),
}


def _syntax_fault(reader: _Reader, error: yaml.MarkedYAMLError) -> None:
    # Where the quote or the line without colon began says more than where the parser gave up.
    at_start = any(words in (error.context or "") for words in ("quoted scalar", "simple key"))
    mark = (error.context_mark if at_start else None) or error.problem_mark or error.context_mark
    line = mark.line + 1 if mark else 0
    if any(f.line == line for f in reader.findings):
        return  # a tab or control character on this line has been told already
    problem = (error.problem or "a fault of form").replace("\t", "tab")
    wanted, but, found = problem.partition(", but found ")
    other = (wanted.removeprefix("expected "), found, "") if but else (
        "'key: value' lines, indented with spaces", problem.removeprefix("found "), "")
    expected, found, remedy = _PROBLEMS.get(problem, other)
    reader.fault(line, "form", expected, found, remedy)
