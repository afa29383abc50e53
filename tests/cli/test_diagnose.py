"""The command: every check in one go, for people and for scripts, the code telling whether anything hinders."""

import json
from pathlib import Path

import pytest

from hvhost.cli.diagnose import run

DEMO = str(Path(__file__).parents[2] / "configs" / "demo.bench.yaml")


def quick(tmp_path: Path, *more: str) -> list[str]:
    """Arguments that wait for nothing."""
    return [DEMO, "--socket", str(tmp_path / "none.sock"), "--runs", str(tmp_path), "--seconds", "0.02", *more]


def test_a_machine_without_the_board_is_hindered(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Code 1, one line for each thing, the missing port named with its remedy, nothing thrown."""
    assert run(quick(tmp_path, "--port", str(tmp_path / "ttyNone"))) == 1
    lines = capsys.readouterr().out.splitlines()
    assert len(lines) > 8
    assert any(line.startswith("fault      port: ") and "plug the board in" in line for line in lines)


def test_json_is_one_object(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """With the port left alone nothing else hinders here."""
    assert run(quick(tmp_path, "--json", "--no-board", "--port", "/dev/null")) == 0
    told = json.loads(capsys.readouterr().out)
    assert told["bench"] == "demo"
    assert told["hindered"] is False
    names = {check["name"] for check in told["checks"]}
    assert {"python", "clock", "disk", "daemon", "port permission", "event loop", "real-time scheduling"} <= names
    assert all(set(check) == {"name", "verdict", "found", "remedy"} for check in told["checks"])


def test_a_time_out_of_range_is_usage(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Nobody waits for ever."""
    with pytest.raises(SystemExit) as ended:
        run([DEMO, "--seconds", "0"])
    assert ended.value.code == 2
    assert "--seconds" in capsys.readouterr().err
