"""YAML as texts with lines: what is read, what is refused."""

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hvhost.words.yamltree import DEEPEST, LARGEST, named, read_yaml

GOOD = "name: a bench\ninner:\n  volts: 2 kV\nmore:\n  - volts: 1 kV\n  - volts: 3 V\n    time: 2 min\n"


def _faults(text: str) -> list[tuple[int, str, str, str]]:
    return [(f.line, f.what, f.expected, f.found) for f in read_yaml("f", text)[1]]


def test_scalars_stay_text() -> None:
    """What YAML 1.1 turns into numbers, dates, truth or nothing stays the text that was typed."""
    text = ("a: 10:30\nb: on\nc: 012\nd: 1e3\ne: null\nf: ~\ng: 2027-01-01\nh: 0x10\ni: .inf\nj: 1_000\n"
            "k: 'q'\nl: \"w\"\n")
    root, faults = read_yaml("f", text)
    assert faults == ()
    assert root is not None
    assert root.plain() == {"a": "10:30", "b": "on", "c": "012", "d": "1e3", "e": "null", "f": "~", "g": "2027-01-01",
                            "h": "0x10", "i": ".inf", "j": "1_000", "k": "q", "l": "w"}


def test_lines_of_values_and_keys() -> None:
    """Every value knows its line and that of its key; a missing one gives the block around it."""
    root, _ = read_yaml("f", GOOD)
    assert root is not None
    assert root.line_of("inner") == 2
    assert root.line_of("inner", "volts") == 3
    assert root.line_of("more", 1, "time") == 7
    assert root.line_of("inner", "nothing") == 2
    assert root.at(("inner", "volts")).text == "2 kV"
    assert root.has(("inner", "volts"))
    assert not root.has(("inner", "amps"))


def test_block_texts_and_flow_style_are_read() -> None:
    """Literal and folded texts, lists and maps in brackets are plain YAML and welcome."""
    root, faults = read_yaml("f", "---\na: {b: 1 V, c: [x, 'y: z']}\nd: |\n  one\n  two\n")
    assert faults == ()
    assert root is not None
    assert root.plain() == {"a": {"b": "1 V", "c": ("x", "y: z")}, "d": "one\ntwo\n"}


@pytest.mark.parametrize(("text", "rows"), [
    ("a: 1\na: 2\n", [(2, "a", "each key once", "'a' again (first on line 1)")]),
    ("a: {b: 1, b: 2, b: 3}\n", [(1, "b", "each key once", "'b' again (first on line 1)")] * 2),
    ("a: &x 1\nb: *x\n", [(1, "anchor", "a plain value", "'&x'"), (2, "alias", "the value written out", "'*x'")]),
    ("a: &x\n  b: 1\n", [(1, "anchor", "a plain value", "'&x'")]),
    ("a: &x [1]\n", [(1, "anchor", "a plain value", "'&x'")]),
    ("<<: {a: 1}\n", [(1, "merge", "keys written out", "'<<'")]),
    ("a: !!int 3\n", [(1, "tag", "a plain value", "'!!int'")]),
    ("a: !!python/object:os.system x\n", [(1, "tag", "a plain value", "'!!python/object:os.system'")]),
    ("a: !thing {b: 1}\n", [(1, "tag", "a plain value", "'!thing'")]),
    ("%YAML 1.2\n---\na: 1\n", [(1, "directive", "no line that begins with '%'", "a directive")]),
    ("a: 1\n---\nb: 2\n", [(2, "document", "one document in the file", "another one after '---'")]),
    ("? [a]\n: 1\nb: 2\n", [(1, "key", "a word", "a list")]),
    ("? {a: 1}\n: 1\nb: 2\n", [(1, "key", "a word", "a block of keys")]),
    ("a:\n\tb: 1\n", [(2, "indentation", "spaces", "a tab")]),
    ("a: \x01\n", [(1, "text", "visible characters", "control character U+0001")]),
    ("a: b\x7fc\n", [(1, "text", "visible characters", "control character U+007F")]),
    ("a: b\u2028c: d\n", [(1, "text", "visible characters", "control character U+2028")]),
    ("a: b\x85c: d\n", [(1, "text", "visible characters", "control character U+0085")]),
    ("a: b\u202ec\n", [(1, "text", "visible characters", "control character U+202E")]),
    ("a: 1\n# zero\u200bwidth\n", [(2, "text", "visible characters", "control character U+200B")]),
    ("a: [1,, 2]\n", [(1, "form", "the node content", "','")]),
    ("", [(0, "file", "a block of keys, 'key: value' on each line", "an empty file")]),
    ("# only this\n", [(0, "file", "a block of keys, 'key: value' on each line", "an empty file")]),
    ("- a\n", [(1, "file", "a block of keys, 'key: value' on each line", "a list")]),
    ("word\n", [(1, "file", "a block of keys, 'key: value' on each line", "'word'")]),
    ("a: 'x\n", [(1, "form", "a closing quote", "the end of the file")]),
    ("a: b: c\n", [(1, "form", "one 'key: value' on a line, indented like its neighbours",
                    "a second ': ', or a key indented too far")]),
    ("a: 1\nword\nb: 2\n", [(2, "form", "'key: value'", "a line without ': '")]),
])
def test_faults_of_form(text: str, rows: list[tuple[int, str, str, str]]) -> None:
    """Each thing that makes YAML guess or hide something is a fault with its line."""
    assert _faults(text) == rows


def test_merge_in_quotes_is_a_word() -> None:
    """A quoted '<<' is a text like another."""
    assert _faults("'<<': 1\n") == []


def test_first_of_two_keys_is_kept() -> None:
    """The first value stands, so that further faults are told about what was read first."""
    root, _ = read_yaml("f", "a: 1\nb: 2\na: 3\n")
    assert root is not None
    assert root.plain() == {"a": "1", "b": "2"}


def test_byte_order_mark_is_passed_over() -> None:
    """Some editors begin a file with it."""
    root, faults = read_yaml("f", "\ufeffa: 1\n")
    assert faults == ()
    assert root is not None
    assert root.plain() == {"a": "1"}


@pytest.mark.parametrize("text", ["a: " + "[" * 5000, "a: " + "{b: " * 5000, "[" * 100_000])
def test_depth_is_bounded(text: str) -> None:
    """Blocks without end are refused at a depth, before anything recurses."""
    root, faults = read_yaml("f", text)
    assert root is None
    assert [f.what for f in faults] == ["nesting"]
    assert str(DEEPEST) in faults[0].expected


def test_size_is_bounded() -> None:
    """A file larger than any honest one is not parsed at all."""
    root, faults = read_yaml("f", "a: 1\n" * LARGEST)
    assert root is None
    assert [f.what for f in faults] == ["size"]


@settings(max_examples=200, deadline=None)
@given(st.lists(st.sampled_from([*"ab:-?[]{},&*!|>'\"%@`#<~ \n\t0.", ": ", "\n  ", "\n- "]), max_size=60).map("".join))
def test_any_text_gives_a_tree_or_faults(text: str) -> None:
    """No text ends the reading by an exception; without a tree there is a fault, and lines stay in the text."""
    root, faults = read_yaml("f", text)
    assert root is not None or faults
    assert all(0 <= f.line <= text.count("\n") + 1 for f in faults)


@pytest.mark.parametrize(("place", "name"), [((), "file"), (("steps", 1, "hold"), "steps.2.hold"), (("a\x1bb",), "a?b"),
                                             (("x" * 300,), "x" * 40)])
def test_places_are_named_for_people(place: tuple[str | int, ...], name: str) -> None:
    """List places count from 1; nothing unprintable and nothing endless reaches a terminal."""
    assert named(place) == name
