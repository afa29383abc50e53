"""The commands as a set: each is there, documented, says its exit codes, and is imported only when asked for."""

import os
import subprocess
import sys
from importlib import import_module
from pathlib import Path

import pytest

from hvhost.cli import COMMANDS, exits, main, usage

HEAVY = {"numpy", "pydantic", "yaml", "rich", "serial", "pyarrow", "asyncio", "hvhost.standin", "hvhost.supervisor"}


@pytest.mark.parametrize("command", sorted(COMMANDS))
def test_each_command_has_a_module_and_a_help(command: str, capsys: pytest.CaptureFixture[str]) -> None:
    """``--help`` of each prints its usage and the exit codes, and ends with 0."""
    module = import_module(f"hvhost.cli.{COMMANDS[command][0]}")
    assert module.__doc__
    with pytest.raises(SystemExit) as end:
        main([command, "--help"])
    assert end.value.code == 0
    told = capsys.readouterr().out
    assert told.startswith(f"usage: hvhost {command}")
    assert "exit codes:" in told


def test_the_overview_lists_every_command(capsys: pytest.CaptureFixture[str]) -> None:
    """No arguments is a usage fault, ``--help`` is none; both list everything with the caution."""
    assert main([]) == exits.USAGE
    assert main(["--help"]) == exits.PASSED
    told = capsys.readouterr().out
    for name in COMMANDS:
        assert f"  {name} " in told
    assert "Software is never the safety device" in usage()


def test_an_unknown_command_names_the_nearest(capsys: pytest.CaptureFixture[str]) -> None:
    """A slip of the finger is answered with what was probably meant."""
    assert main(["cutt"]) == exits.USAGE
    assert "did you mean 'cut'" in capsys.readouterr().err


@pytest.mark.parametrize("words", [["--help"], ["cut", "--socket", "/none/x"], ["lower", "--socket", "/none/x"]])
def test_stops_and_help_import_nothing_heavy(words: list[str]) -> None:
    """A stop starts as fast as the interpreter allows."""
    code = (f"import sys; from hvhost.cli import main; main({words!r}); "
            "print('modules', *sorted(sys.modules))")
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    modules = set(done.stdout.rpartition("modules")[2].split())
    assert not modules & HEAVY, modules & HEAVY


def test_a_closed_pipe_is_no_fault() -> None:
    """``hvhost ... | head`` ends quietly."""
    read, write = os.pipe()
    os.close(read)
    child = subprocess.run([sys.executable, "-m", "hvhost", "schema", "bench"], stdout=write, stderr=subprocess.PIPE,
                           text=True, check=False)
    os.close(write)
    assert "Traceback" not in child.stderr
    assert child.returncode in (0, 120), child.stderr


def test_an_error_of_ours_is_a_sentence(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    """A refused file is told by expected, found and place, with the code for refusals."""
    assert main(["show", "none", "--runs", str(tmp_path)]) == exits.REFUSED
    told = capsys.readouterr().err
    assert told.startswith("hvhost show: ")
    assert "expected" in told
    assert "Traceback" not in told
