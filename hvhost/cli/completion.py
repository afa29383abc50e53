"""``hvhost completion SHELL``: a completion script, made from the table of commands and what their help says."""

import argparse
import contextlib
import io
import re
from collections.abc import Iterable
from importlib import import_module

from hvhost.cli import COMMANDS, exits

ABOUT = """Prints a completion script for a shell, from the commands and options of this version.  Load it with
  bash:  source <(hvhost completion bash)
  zsh:   source <(hvhost completion zsh)
  fish:  hvhost completion fish | source"""
OPTION = re.compile(r"(?<![\w-])--[a-z][a-z-]*")
SHELLS = ("bash", "zsh", "fish")


def run(argv: list[str]) -> int:
    """Print the script."""
    parser = argparse.ArgumentParser(prog="hvhost completion", description=ABOUT, epilog=exits.EPILOG,
                                     formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("shell", choices=SHELLS)
    options = parser.parse_args(argv)
    table = {name: (text, options_of(name)) for name, (_, text) in COMMANDS.items()}
    print({"bash": bash, "zsh": zsh, "fish": fish}[options.shell](table), end="")
    return exits.PASSED


Table = dict[str, tuple[str, tuple[str, ...]]]


def options_of(command: str) -> tuple[str, ...]:
    """The long options that a command's help names, sorted; () where it has no help."""
    if command == "completion":
        return ("--help",)
    out = io.StringIO()
    with contextlib.suppress(SystemExit, ModuleNotFoundError), contextlib.redirect_stdout(out):
        import_module(f"hvhost.cli.{COMMANDS[command][0]}").run(["--help"])
    usage = out.getvalue().partition("\n\n")[0]  # prose below may name options of other commands
    return tuple(sorted({*OPTION.findall(usage), "--help"}))


def bash(table: Table) -> str:
    """A function for bash's programmable completion."""
    cases = "\n".join(f"        {name}) words={_quoted(' '.join((*options, *_words(name))))} ;;"
                      for name, (_, options) in table.items())
    return f"""_hvhost() {{
    local here=${{COMP_WORDS[COMP_CWORD]}} words
    if [ "$COMP_CWORD" -eq 1 ]; then
        COMPREPLY=($(compgen -W {_quoted(' '.join((*table, '--help', '--version')))} -- "$here"))
        return
    fi
    case ${{COMP_WORDS[1]}} in
{cases}
        *) words= ;;
    esac
    COMPREPLY=($(compgen -W "$words" -- "$here") $(compgen -f -- "$here"))
}}
complete -o filenames -F _hvhost hvhost
"""


def zsh(table: Table) -> str:
    """A function for zsh's completion system."""
    commands = "\n".join(f"        {_quoted(f'{name}:{text}')}" for name, (text, _) in table.items())
    cases = "\n".join(f"        {name}) compadd -- {' '.join((*options, *_words(name)))} ;;"
                      for name, (_, options) in table.items())
    return f"""#compdef hvhost
_hvhost() {{
    local -a commands
    commands=(
{commands}
    )
    if (( CURRENT == 2 )); then
        _describe command commands
        compadd -- --help --version
        return
    fi
    case $words[2] in
{cases}
    esac
    _files
}}
compdef _hvhost hvhost
"""


def fish(table: Table) -> str:
    """Lines for fish."""
    lines = [f"complete -c hvhost -n __fish_use_subcommand -f -a {name} -d {_quoted(text)}"
             for name, (text, _) in table.items()]
    for name, (_, options) in table.items():
        here = f"complete -c hvhost -n '__fish_seen_subcommand_from {name}'"
        lines += [f"{here} -l {option[2:]}" for option in options]
        lines += [f"{here} -f -a {word}" for word in _words(name)]
    return "\n".join(lines) + "\n"


def _words(command: str) -> Iterable[str]:
    return SHELLS if command == "completion" else ()


def _quoted(text: str) -> str:
    return "'" + text.replace("'", "'\\''") + "'"
