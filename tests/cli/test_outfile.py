"""A file that cannot be written is told before anything is done."""

from pathlib import Path

import pytest

from hvhost.cli import demo, exits, main
from hvhost.cli.outfile import open_output
from hvhost.words.errors import UsageFault
from tests.cli.conftest import CONFIGS


@pytest.mark.parametrize("name", ["missing/truth.jsonl", "."])
def test_a_path_that_cannot_be_written_is_a_usage_fault(tmp_path: Path, name: str) -> None:
    """A missing folder, a folder: the path, what the system says, the remedy."""
    with pytest.raises(UsageFault, match=r"expected a file that can be written, found .*; name another file"):
        open_output(tmp_path / name)


def test_what_was_opened_takes_lines(tmp_path: Path) -> None:
    """The file is there at once, empty."""
    with open_output(tmp_path / "t") as file:
        file.write("x\n")
    assert (tmp_path / "t").read_text(encoding="ascii") == "x\n"


@pytest.mark.parametrize("words", [
    ["rehearse", str(CONFIGS / "demo.bench.yaml"), str(CONFIGS / "demo.plan.yaml"), "--fast", "--truth", "{}/no/t"],
    ["demo", "--truth", "{}/no/t"], ["standin", "--truth", "{}/no/t"], ["standin", "--eeprom", "{}/no/e"]])
def test_commands_tell_it_before_they_begin(words: list[str], tmp_path: Path, capsys: pytest.CaptureFixture[str],
                                            monkeypatch: pytest.MonkeyPatch) -> None:
    """No run is opened, no process is started, and it is no fault of the program."""
    monkeypatch.setattr(demo, "Rig", None)
    assert main([word.format(tmp_path) for word in words]) == exits.USAGE
    told = capsys.readouterr().err
    assert "name another file" in told
    assert f"{tmp_path}/no/" in told
