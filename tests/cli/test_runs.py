"""``hvhost runs``: the catalogue, filtered, and what is still to be handed over."""

import json
from pathlib import Path

import pytest

from hvhost.cli import main
from hvhost.publish.delivery import _note_failure
from tests.publish.test_delivery import made


def lines(root: Path, capsys: pytest.CaptureFixture[str], *words: str) -> list[str]:
    """What the command prints."""
    assert main(["runs", "--runs", str(root), *words]) == 0
    return capsys.readouterr().out.splitlines()


def test_a_filter_chooses_and_a_wrong_one_is_refused(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Exit code 5 and the place of the fault; nothing is listed then."""
    made(tmp_path, "0001")
    made(tmp_path, "0002", close=False)
    assert [line.split()[0] for line in lines(tmp_path, capsys)] == ["0001", "0002"]
    assert [line.split()[0] for line in lines(tmp_path, capsys, "--where", "run = 0002 or order = x")] == ["0002"]
    assert main(["runs", "--runs", str(tmp_path), "--where", "verdict = pass and"]) == 5
    told = capsys.readouterr()
    assert told.out == ""
    assert "--where, character 19: expected a column" in told.err


def test_what_is_not_handed_over_is_listed_with_its_last_failure(tmp_path: Path,
                                                                capsys: pytest.CaptureFixture[str]) -> None:
    """For people a line below the run, for scripts a field."""
    first = made(tmp_path, "0001")
    made(tmp_path, "0002")
    made(tmp_path, "0003", archive=False)
    (tmp_path / ".undelivered").mkdir()
    _note_failure(tmp_path, first.name, "the disk is full")
    told = lines(tmp_path, capsys, "--undelivered")
    assert [line.split()[0] for line in told[::2]] == ["0001", "0002"]
    assert "tried 1 times: the disk is full; again after" in told[1]
    assert told[3].strip() == "not tried yet"
    listed = [json.loads(line) for line in lines(tmp_path, capsys, "--undelivered", "--json")]
    assert [one["delivery"] for one in listed] == ["due", "due"]
    assert "disk is full" in listed[0]["delivery_failure"]
    assert [json.loads(line)["order"] for line in lines(tmp_path, capsys, "--json")] == ["A-7"] * 3
