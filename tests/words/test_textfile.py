"""YAML as texts with lines: what is read, what is refused, and how a model's faults find their lines."""

from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hvhost.words.errors import FileFault
from hvhost.words.fields import Block, Line, Seconds, Volts, YesNo
from hvhost.words.findings import Grade
from hvhost.words.modelpaths import Absent
from hvhost.words.textfile import DEEPEST, LARGEST, MOST_FAULTS, read_model, read_text, read_yaml


class Inner(Block):
    volts: Volts
    time: Seconds = 1.0


class Outer(Block):
    name: Line
    inner: Inner
    more: tuple[Inner, ...] = ()
    on: YesNo = True


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
    ("a: \x01\n", [(1, "text", "printable characters", "control character U+0001")]),
    ("a: b\x7fc\n", [(1, "text", "printable characters", "control character U+007F")]),
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


def test_number_of_faults_told_is_bounded() -> None:
    """A file of garbage is said to be one."""
    reading = read_model(Outer, "f", "".join(f"key{n}: 1\n" for n in range(1000)))
    assert len(reading.findings) == MOST_FAULTS + 1
    assert "more faults" in reading.findings[-1].found


def test_good_file_gives_the_model() -> None:
    """Texts become SI values, missing ones their defaults."""
    reading = read_model(Outer, "f", GOOD)
    assert reading.findings == ()
    assert reading.model is not None
    assert reading.model.inner.volts == 2000.0
    assert reading.model.more[1].time == 120.0
    assert reading.model.on is True
    assert reading.line_of("more", 1, "time") == 7


def test_every_fault_in_one_go() -> None:
    """Faults of form and of every field come together, sorted by line, and no model."""
    reading = read_model(Outer, "f.yaml", "nam: x\ninner: {volts: 1 KV, volt: 2 V}\nmore:\n  - time: 3 V\n  - text\n"
                         "on: on\nname: [a]\ninner: 3\n")
    assert reading.model is None
    assert [(f.line, f.what, f.found, f.remedy) for f in reading.findings] == [
        (1, "nam", "'nam'", "did you mean 'name'?"),
        (2, "inner.volt", "'volt'", "did you mean 'volts'?"),
        (2, "inner.volts", "'1 KV'", "did you mean '1 kV'?"),
        (4, "more.1.time", "'3 V'", ""),
        (4, "more.1.volts", "nothing", ""),
        (5, "more.2", "'text'", ""),
        (6, "on", "'on'", "did you mean 'yes'?"),
        (7, "name", "a list", ""),
        (8, "inner", "'inner' again (first on line 2)", "")]
    assert all(f.grade is Grade.REFUSE and f.file == "f.yaml" for f in reading.findings)


def test_partial_lets_checks_run_beside_faults() -> None:
    """What was right can be checked although something else was wrong."""
    partial = read_model(Outer, "f", "name: x\ninner: {volts: 5 kV, time: soon}\n").partial
    assert partial.inner.volts == 5000.0
    with pytest.raises(Absent):
        _ = partial.inner.time


def test_form_fault_alone_refuses_the_model() -> None:
    """A duplicate key whose first value is right still refuses the file."""
    reading = read_model(Outer, "f", GOOD + "name: again\n")
    assert reading.model is None
    assert [f.what for f in reading.findings] == ["name"]
    assert reading.partial.name == "a bench"


def test_unreadable_text_gives_findings_and_no_values() -> None:
    """Broken YAML gives its fault, and nothing to check."""
    reading = read_model(Outer, "f", "a: 'x")
    assert reading.model is None
    assert len(reading.findings) == 1
    with pytest.raises(Absent):
        _ = reading.partial.name


def test_reads_utf8_only(tmp_path: Path) -> None:
    """Bytes that are no UTF-8 are a fault with line and byte."""
    path = tmp_path / "f.yaml"
    path.write_bytes("a: 1\nb: 2.2 kΩ\n".encode("latin-1", "replace").replace(b"?", b"\xd9"))
    with pytest.raises(FileFault) as caught:
        read_text(path)
    assert caught.value.where == f"{path}:2"
    assert caught.value.found == "byte 0xD9"
    assert caught.value.findings
    path.write_text("a: Ω\n", encoding="utf-8")
    assert read_text(path) == "a: Ω\n"


def test_does_not_read_more_than_it_may(tmp_path: Path) -> None:
    """A huge file is read up to a bound only, and is then refused by its size."""
    path = tmp_path / "f.yaml"
    path.write_bytes(b"a" * (LARGEST * 8))
    text = read_text(path)
    assert len(text) <= LARGEST * 4 + 1
    assert read_yaml("f", text)[1][0].what == "size"


ALPHABET = st.sampled_from([*"ab:-?[]{},&*!|>'\"%@`#<~ \n\t0.", "name", "inner", "volts", "1 kV", ": ", "\n  "])


@settings(max_examples=300, deadline=None)
@given(st.lists(ALPHABET, max_size=60).map("".join) | st.text(max_size=80))
def test_any_text_gives_a_tree_or_faults(text: str) -> None:
    """No text ends the reading by an exception; where there is no tree there is a fault."""
    root, faults = read_yaml("f", text)
    assert root is not None or faults
    reading = read_model(Outer, "f", text)
    assert (reading.model is None) == bool(reading.findings)
    for finding in reading.findings:
        assert finding.text.isprintable()
        assert 0 <= finding.line <= text.count("\n") + text.count("\r") + 2
