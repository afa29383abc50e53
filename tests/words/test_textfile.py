"""A file read as a model: every fault in one go, each with its line."""

from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hvhost.words.errors import FileFault
from hvhost.words.fields import Block, Line, Seconds, Volts, YesNo
from hvhost.words.findings import Grade
from hvhost.words.modelpaths import Absent
from hvhost.words.textfile import MOST_FAULTS, read_model, read_text, read_yaml
from hvhost.words.yamltree import LARGEST


class Inner(Block):
    volts: Volts
    time: Seconds = 1.0


class Outer(Block):
    name: Line
    inner: Inner
    more: tuple[Inner, ...] = ()
    on: YesNo = True


GOOD = "name: a bench\ninner:\n  volts: 2 kV\nmore:\n  - volts: 1 kV\n  - volts: 3 V\n    time: 2 min\n"


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
    with pytest.raises(FileFault, match="at most 256 KiB, found more than 1024 KiB"):
        read_text(path)


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
