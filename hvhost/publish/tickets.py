"""The ticket that proves control, kept beside the socket for the same user's other programs and nobody else's."""

import os
import stat
from pathlib import Path


def ticket_file(socket: str) -> Path:
    """Where `hvhost seat` keeps its ticket for the same user's other commands."""
    return Path(socket + ".seat")


def read_ticket(socket: str) -> str:
    """The kept ticket, '' where there is none of ours."""
    path = ticket_file(socket)
    try:
        status = path.stat()
        if status.st_uid != os.getuid() or stat.S_IMODE(status.st_mode) & 0o077:
            return ""
        return path.read_text(encoding="ascii").strip()
    except (OSError, ValueError):
        return ""


def write_ticket(socket: str, ticket: str) -> None:
    """Keep a ticket, readable by this user only."""
    path = ticket_file(socket)
    path.unlink(missing_ok=True)
    descriptor = os.open(path, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o600)
    with os.fdopen(descriptor, "w", encoding="ascii") as file:
        file.write(ticket)
