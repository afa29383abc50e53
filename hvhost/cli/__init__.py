"""The commands: one file each, imported only when asked for, so that a stop starts as fast as it can."""

import sys
from importlib import import_module

TYPE_CHECKING = False
if TYPE_CHECKING:
    from collections.abc import Sequence

# command -> (module, one line); the order is that of a working day
COMMANDS: "dict[str, tuple[str, str]]" = {
    "demo": ("demo", "the whole job in under a minute, against a stand-in"),
    "check": ("check", "check bench files, plans and run sheets: every fault in one go"),
    "schema": ("schema", "print the JSON Schema of a bench file, plan, run sheet or result"),
    "standin": ("standin", "a bench in software: MCU and plant, faults by name"),
    "rehearse": ("rehearse", "run a plan against a stand-in"),
    "serve": ("serve", "the daemon of one bench"),
    "diagnose": ("diagnose", "whether this machine, its port and what the bench names are fit"),
    "commission": ("commission", "write a bench file's settings into the MCU"),
    "run": ("run", "check a plan, arm it, follow it to its verdict"),
    "arm": ("arm", "arm the prepared run, or a direct run; --cancel voids it"),
    "seat": ("seat", "take control of the bench and keep it until this command ends"),
    "set": ("set", "set-points of a direct run"),
    "lower": ("lower", "ramp to zero at the down-slew, then cut; needs no control"),
    "cut": ("cut", "cut at once by every means the bench has; needs no control"),
    "reset": ("reset", "clear a latch by naming its causes"),
    "status": ("status", "what the bench does now"),
    "watch": ("watch", "the screen"),
    "runs": ("runs", "the catalogue of all runs"),
    "show": ("show", "one run: what was applied, what leaked, why it ended, the verdict"),
    "export": ("export", "a run's samples as CSV or Parquet"),
    "amend": ("amend", "correct a closed run's sheet, or enter what a breakdown was, as a revision"),
    "deliver": ("deliver", "hand the results of closed runs over, as the bench file says"),
    "recover": ("recover", "close a run that nothing closed"),
    "replay": ("replay", "put a record back through the core: same verdicts, or where they part"),
    "speed": ("speed", "measure the budgets on this machine"),
    "completion": ("completion", "print a completion script for a shell"),
}


def usage() -> str:
    """The help of the whole program."""
    from hvhost.cli.exits import EPILOG

    width = max(map(len, COMMANDS))
    lines = [f"  {name:<{width}}  {text}" for name, (_, text) in COMMANDS.items()]
    return ("usage: hvhost COMMAND ...\n\n"
            "Runs scripted high-voltage tests from outside the danger zone.  Software is never the safety device.\n\n"
            + "\n".join(lines) + f"\n\nhvhost COMMAND --help tells more; {EPILOG}\n")


def main(argv: "Sequence[str] | None" = None) -> int:
    """Run one command; returns its exit code (see `hvhost.cli.exits`)."""
    args = list(sys.argv[1:] if argv is None else argv)
    if not args or args[0] in ("-h", "--help", "help"):
        print(usage(), end="")
        return 0 if args else 2
    if args[0] == "--version":
        from hvhost import __version__

        print(f"hvhost {__version__}")
        return 0
    if args[0] not in COMMANDS:
        from difflib import get_close_matches

        near = get_close_matches(args[0], COMMANDS, 1)
        hint = f"; did you mean {near[0]!r}?" if near else ""
        print(f"hvhost: expected a command, found {args[0]!r}{hint} (hvhost --help lists them)", file=sys.stderr)
        return 2
    return _run(args)


def _run(args: "list[str]") -> int:
    from hvhost.words.errors import HvhostError

    try:
        code: int = import_module(f"hvhost.cli.{COMMANDS[args[0]][0]}").run(args[1:])
        return code
    except HvhostError as error:
        for finding in getattr(error, "findings", ()):
            print(getattr(finding, "text", finding), file=sys.stderr)
        print(f"hvhost {args[0]}: {error}", file=sys.stderr)
        return error.exit_code
    except BrokenPipeError:
        return 0
    except Exception as error:
        import os

        if os.environ.get("HVHOST_TRACEBACK"):
            raise
        print(f"hvhost {args[0]}: expected no fault of this program, found {type(error).__name__}: {error}; "
              "if anything may be energised use the emergency switching off; HVHOST_TRACEBACK=1 shows where",
              file=sys.stderr)
        return 70
    except KeyboardInterrupt:
        print(f"hvhost {args[0]}: ended by the operator", file=sys.stderr)
        return 7
