"""``hvhost amend``: a correction or a look at a breakdown, on the page at once."""

import shutil
from pathlib import Path

import pytest

from hvhost.cli import main
from hvhost.record.folder import RunFolder
from hvhost.record.manifest import revisions_of
from hvhost.report.closing import close_run
from tests.record.making import Case, made_run


@pytest.fixture(scope="module")
def original(tmp_path_factory: pytest.TempPathFactory) -> RunFolder:
    """A closed run with a breakdown."""
    made = made_run(tmp_path_factory.mktemp("runs"), Case(break_at_s=0.5))
    close_run(made)
    return made


@pytest.fixture
def folder(original: RunFolder, tmp_path: Path) -> RunFolder:
    """A copy of it."""
    return RunFolder(Path(shutil.copytree(original.path, tmp_path / original.name)))


def amend(folder: RunFolder, *words: str) -> int:
    """Run the command."""
    return main(["amend", "0007", "--runs", str(folder.path.parent), "--as", "operator A", *words])


def test_a_field_is_corrected_and_shown(folder: RunFolder, capsys: pytest.CaptureFixture[str]) -> None:
    """What was there, what is there now, who and why; the verdict's exit code stays."""
    assert amend(folder, "--field", "specimen=S-2", "--field", "order=A = B", "--reason", "label misread") == 0
    assert "revision 1: specimen: 'S-1' corrected to 'S-2'" in capsys.readouterr().out
    assert main(["show", "0007", "--runs", str(folder.path.parent)]) == 1
    page = capsys.readouterr().out
    assert "S-2 (corrected, revision 1)" in page
    assert "A = B (corrected, revision 1)" in page


def test_a_breakdown_s_kind_is_entered_by_its_number(folder: RunFolder, capsys: pytest.CaptureFixture[str]) -> None:
    """The page says what was seen and by whom."""
    assert amend(folder, "--breakdown", "1", "--kind", "puncture", "--reason", "hole at the edge") == 0
    assert "breakdown 1: puncture, seen by operator A: hole at the edge" in capsys.readouterr().out
    assert main(["show", "0007", "--runs", str(folder.path.parent), "--json"]) == 1
    assert '"kind": "puncture (seen by operator A)"' in capsys.readouterr().out


@pytest.mark.parametrize(("words", "code", "said"), [
    (["--field", "specimen=S-2"], 5, "a reason"), (["--field", "specimen"], 2, "KEY=VALUE"),
    ([], 2, "--field KEY=VALUE"),
    (["--field", "specimen=S-2", "--breakdown", "1", "--kind", "puncture"], 2, "neither, both"),
    (["--breakdown", "1"], 2, "--field"), (["--breakdown", "2", "--kind", "puncture"], 5, "from 1 to 1"),
    (["--breakdown", "1", "--kind", "arc"], 5, "puncture or flashover or sparkover"),
    (["--field", "specimen=S-2", "--field", "specimen=S-3", "--reason", "x"], 2, "each key once")])
def test_what_is_wrong_is_a_sentence_and_adds_nothing(folder: RunFolder, capsys: pytest.CaptureFixture[str],
                                                      words: list[str], code: int, said: str) -> None:
    """No revision without a reason, a name, one act and a breakdown that is there."""
    assert amend(folder, *words) == code
    assert said in capsys.readouterr().err
    assert revisions_of(folder) == ()
