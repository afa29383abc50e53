"""The section ``archive``: off where missing; a CSV that can be read again; a command named by its whole path."""

import pytest

from hvhost.bench.archive import WORDS_MAX, Archive, archive_of
from hvhost.bench.file import bench_from
from hvhost.words.findings import Grade
from tests.bench.changes import DEMO, assert_both_sides, changed, findings

HERE = "archive.results=/srv/results"


def _archive(*changes: str) -> Archive:
    made = bench_from("b.yaml", changed(HERE, *changes)).archive
    assert made is not None
    return made


def test_a_bench_file_without_the_section_hands_nothing_over() -> None:
    """Nothing leaves the runs folder unless the bench file says where to."""
    assert bench_from("b.yaml", DEMO).archive is None
    assert archive_of(None) is None


def test_the_section_says_folder_form_and_command() -> None:
    """Words of the file become marks; defaults are a decimal point, a comma, UTC, no command, no rehearsals."""
    assert _archive() == Archive(results="/srv/results")
    made = _archive("archive.decimal=comma", "archive.separator=semicolon", "archive.zone=Europe/Berlin",
                    "archive.command=[/usr/local/bin/import-result, --quiet]", "archive.command_limit=2 min",
                    "archive.rehearsals=yes")
    assert made == Archive(results="/srv/results", decimal=",", separator=";", zone="Europe/Berlin",
                           command=("/usr/local/bin/import-result", "--quiet"), command_limit_s=120.0, rehearsals=True)


def test_the_separator_is_not_the_decimal_mark() -> None:
    """A file that no program could read again is refused."""
    assert_both_sides((HERE, "archive.decimal=comma", "archive.separator=semicolon"),
                      (HERE, "archive.decimal=comma", "archive.separator=comma"), Grade.REFUSE, "archive.separator")


@pytest.mark.parametrize("command", ["[import-result]", "[./import-result]", "['//x']"])
def test_the_command_is_named_by_its_whole_path(command: str) -> None:
    """No search path and no working folder decides what is run."""
    assert_both_sides((HERE, "archive.command=[/bin/true]"), (HERE, f"archive.command={command}"), Grade.REFUSE,
                      "archive.command")


def test_the_command_is_short() -> None:
    """A list that long is a mistake."""
    words = ", ".join(["/bin/true"] + ["x"] * WORDS_MAX)
    assert [f.what for f in findings(HERE, f"archive.command=[{words}]")] == ["archive.command"]


@pytest.mark.parametrize(("change", "key"), [
    ("archive.results=results", "archive.results"), ("archive.decimal=;", "archive.decimal"),
    ("archive.zone=../zone", "archive.zone"), ("archive.command_limit=0 s", "archive.command_limit"),
    ("archive.command_limit=2 h", "archive.command_limit"), ("archive.password=x", "archive.password")])
def test_what_cannot_be_meant_is_refused_at_its_key(change: str, key: str) -> None:
    """Each fault has its key; nothing is guessed."""
    assert [(f.grade, f.what) for f in findings(HERE, change)] == [(Grade.REFUSE, key)]
