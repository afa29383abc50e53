"""Whether a pseudo-terminal that came back under its old name can be the line that was lost.

The numbers of pseudo-terminals are given anew: the path that led to a board's line may lead to somebody's shell a
second later.  A line to a board stands raw; a terminal that people use processes its output or echoes.
"""

import os
import stat
import termios

PTS_MAJOR = 136  # to 143: Linux gives these majors to the slaves of pseudo-terminals
OFLAG, LFLAG = 1, 3  # places in what tcgetattr returns


def is_pseudo_terminal(path: str) -> bool:
    """Whether a path leads to the slave of a pseudo-terminal."""
    try:
        status = os.stat(path)
    except OSError:
        return False
    return stat.S_ISCHR(status.st_mode) and PTS_MAJOR <= os.major(status.st_rdev) < PTS_MAJOR + 8


def stands_raw(path: str) -> bool:
    """Whether a terminal neither edits, echoes nor processes output; it is looked at and not changed."""
    try:
        descriptor = os.open(path, os.O_RDONLY | os.O_NOCTTY | os.O_NONBLOCK)
    except OSError:
        return False
    try:
        settings = termios.tcgetattr(descriptor)
    except termios.error:
        return False
    finally:
        os.close(descriptor)
    return not settings[OFLAG] & termios.OPOST and not settings[LFLAG] & (termios.ICANON | termios.ECHO)


def may_reopen(path: str) -> bool:
    """Whether a lost port may be opened again under this name without asking anyone."""
    return not is_pseudo_terminal(path) or stands_raw(path)
