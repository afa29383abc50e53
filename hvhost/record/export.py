"""Starts the Parquet export in a process of its own and waits for it, bounded; not for the event loop's thread."""

import subprocess
import sys
from dataclasses import dataclass
from pathlib import Path

from hvhost.record.folder import SAMPLES, RunFolder

TIMEOUT_S = 600.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Exported:
    """What the child did: the file, or why there is none."""

    path: Path | None
    fault: str = ""


def export_command(folder: RunFolder, path: Path | None = None) -> tuple[str, ...]:
    """Return the command line of the child."""
    words = (sys.executable, "-m", "hvhost.record.parquet", str(folder.path))
    return words if path is None else (*words, str(path))


def export_in_child(folder: RunFolder, timeout_s: float = TIMEOUT_S, path: Path | None = None) -> Exported:
    """Write ``samples.parquet``, or ``path``; a child that fails or takes too long leaves the run closed without it."""
    try:
        done = subprocess.run(export_command(folder, path), stdin=subprocess.DEVNULL, capture_output=True, text=True,
                              timeout=timeout_s, check=False)
    except (OSError, subprocess.TimeoutExpired) as error:
        return Exported(path=None, fault=f"the export did not run: {error}")
    if done.returncode:
        words = done.stderr.strip().splitlines()
        return Exported(path=None, fault=words[-1] if words else f"the export ended with code {done.returncode}")
    return Exported(path=path or folder.path / SAMPLES)
