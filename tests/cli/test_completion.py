"""Completion scripts: made from the table, complete, and understood by the shell that is here."""

import os
import shutil
import subprocess

import pytest

from hvhost.cli import COMMANDS
from hvhost.cli.completion import SHELLS, bash, fish, options_of, run, zsh

TABLE = {"check": ("check files: every 'fault'", ("--help", "--json")), "completion": ("a script", ("--help",))}


def completed(script: str, *words: str) -> list[str]:
    """What bash offers after these words, the last one being typed."""
    typed = " ".join(f"'{word}'" for word in words)
    told = subprocess.run(
        ["bash", "--norc", "-c", f"{script}\nCOMP_WORDS=({typed}); COMP_CWORD={len(words) - 1}; _hvhost; "
         "printf '%s\\n' \"${COMPREPLY[@]}\""], capture_output=True, text=True, check=True, cwd="/")
    return told.stdout.split()


def test_every_command_and_its_options_are_in_every_script(capsys: pytest.CaptureFixture[str]) -> None:
    """Nothing is listed by hand."""
    options = {name: options_of(name) for name in ("serve", "diagnose", "completion")}
    assert {"--realtime", "--log", "--help"} <= set(options["serve"])
    assert {"--json", "--no-board", "--seconds"} <= set(options["diagnose"])
    assert options["completion"] == ("--help",)
    for shell in SHELLS:
        assert run([shell]) == 0
        text = capsys.readouterr().out
        for name in COMMANDS:
            assert name in text, f"{shell}: {name}"
        assert "realtime" in text


@pytest.mark.skipif(shutil.which("bash") is None and not os.environ.get("HVHOST_CI"), reason="no bash on this machine")
def test_bash_offers_what_fits() -> None:
    """Commands first, then the command's options; a shell's name for completion itself."""
    script = bash(TABLE)
    assert completed(script, "hvhost", "ch") == ["check"]
    assert completed(script, "hvhost", "check", "--j") == ["--json"]
    assert completed(script, "hvhost", "completion", "z") == ["zsh"]
    assert completed(script, "hvhost", "nosuch", "--") == []


@pytest.mark.parametrize(("shell", "text"), [("zsh", zsh(TABLE)), ("fish", fish(TABLE)), ("bash", bash(TABLE))])
def test_the_shell_parses_it(shell: str, text: str) -> None:
    """Quotes in a help line break nothing; a shell that is here reads the script without running it."""
    assert "'" in text
    if shutil.which(shell) is None:
        assert text.count("'") % 2 == 0
        return
    subprocess.run([shell, "-n"], input=text, text=True, check=True, capture_output=True)


def test_fish_lines_are_whole() -> None:
    """One line for each command and each option."""
    lines = fish(TABLE).splitlines()
    assert all(line.startswith("complete -c hvhost -n ") for line in lines)
    assert sum(" -l json" in line for line in lines) == 1


def test_another_shell_is_refused(capsys: pytest.CaptureFixture[str]) -> None:
    """Usage, with the three that are known."""
    with pytest.raises(SystemExit) as ended:
        run(["tcsh"])
    assert ended.value.code == 2
    assert "bash" in capsys.readouterr().err
