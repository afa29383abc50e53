"""Files that a command is told to write: opened before anything else is done, so that a wrong path costs nothing."""

from pathlib import Path
from typing import TextIO

from hvhost.words.errors import UsageFault


def open_output(path: Path) -> TextIO:
    """Open an ASCII file of lines for writing; raises UsageFault with the remedy."""
    try:
        return path.open("w", encoding="ascii", buffering=1)
    except OSError as refused:
        raise UsageFault("a file that can be written", refused.strerror or str(refused), str(path),
                         "name another file") from None
