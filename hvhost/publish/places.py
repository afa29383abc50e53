"""Where a bench's local control socket lives, for the daemon that makes it and the client that finds it.

One socket per bench name in ``$XDG_RUNTIME_DIR/hvhost`` or, where that is not set, ``~/.local/state/hvhost``.  The
option ``--socket`` beats the environment variable ``HVHOST_SOCKET``, which beats both.  Only ``os`` is imported:
a stop must not wait for anything heavier.
"""

import os
import stat

from hvhost.words.errors import CannotConnect, CommandRefused

ENVIRONMENT = "HVHOST_SOCKET"
SUFFIX = ".sock"
LONGEST_PATH = 107  # bytes: sockaddr_un of Linux holds 108 with its closing zero
LONGEST_NAME = 60
_NAME_CHARACTERS = frozenset("abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789._-")


def socket_folder(environ: "os._Environ[str] | dict[str, str] | None" = None) -> str:
    """Return the folder of the sockets; it need not exist."""
    env = os.environ if environ is None else environ
    runtime = env.get("XDG_RUNTIME_DIR", "")
    if os.path.isabs(runtime):
        return os.path.join(runtime, "hvhost")
    return os.path.join(env.get("HOME") or os.path.expanduser("~"), ".local", "state", "hvhost")


def socket_path(bench: str, option: str = "", environ: "os._Environ[str] | dict[str, str] | None" = None) -> str:
    """Return the path on which the daemon of ``bench`` listens; raises CommandRefused for a name unfit for a file."""
    env = os.environ if environ is None else environ
    chosen = option or env.get(ENVIRONMENT, "")
    if not chosen:
        if not bench or len(bench) > LONGEST_NAME or bench.startswith(".") or not _NAME_CHARACTERS.issuperset(bench):
            raise CommandRefused(f"a bench name of 1 to {LONGEST_NAME} letters, digits, '.', '_' or '-'",
                                 repr(bench)[:80], "bench file", "rename the bench or give --socket")
        chosen = os.path.join(socket_folder(env), bench + SUFFIX)
    if len(os.fsencode(chosen)) > LONGEST_PATH:
        raise CannotConnect(f"a socket path of at most {LONGEST_PATH} bytes", f"{len(os.fsencode(chosen))} bytes",
                            chosen, f"give a shorter one with --socket or {ENVIRONMENT}")
    return chosen


def sockets_here(environ: "os._Environ[str] | dict[str, str] | None" = None) -> tuple[str, ...]:
    """Return every socket file in the folder, sorted; a folder that cannot be read holds none."""
    folder = socket_folder(environ)
    try:
        names = sorted(name for name in os.listdir(folder) if name.endswith(SUFFIX))
    except OSError:
        return ()
    return tuple(path for name in names if _is_socket(path := os.path.join(folder, name)))


def chosen_sockets(option: str = "", environ: "os._Environ[str] | dict[str, str] | None" = None) -> tuple[str, ...]:
    """Return the sockets that a client means: the named one, else all that are here.

    ``option`` is a path or the name of a bench.  Raises CannotConnect where there is none at all.
    """
    env = os.environ if environ is None else environ
    chosen = option or env.get(ENVIRONMENT, "")
    if chosen:
        named = os.path.join(socket_folder(env), chosen + SUFFIX)
        return (named if os.sep not in chosen and not os.path.exists(chosen) else chosen,)
    found = sockets_here(env)
    if not found:
        raise CannotConnect("a running daemon", "none", socket_folder(env),
                            "start one with 'hvhost serve BENCH', or name its socket with --socket")
    return found


def one_socket(option: str = "", environ: "os._Environ[str] | dict[str, str] | None" = None) -> str:
    """Return the one socket that a client means; raises CannotConnect where there are none or several."""
    found = chosen_sockets(option, environ)
    if len(found) > 1:
        names = ", ".join(os.path.basename(path)[: -len(SUFFIX)] for path in found)
        raise CannotConnect("one bench", f"{len(found)}: {names}", socket_folder(environ),
                            "say which with --socket NAME")
    return found[0]


def _is_socket(path: str) -> bool:
    try:
        return stat.S_ISSOCK(os.stat(path).st_mode)
    except OSError:
        return False
