"""Run folders: one per run, named by the UTC of its opening and its number; created whole or not at all.

``run.hvb`` is the original; ``bench.yaml``, ``plan.yaml`` and ``sheet.yaml`` are the texts that were checked;
``meta.json`` is the META entry once more without those texts, for readers without a program.  At close
``samples.parquet``, ``result.json``, ``page.txt`` and ``manifest.sha256`` are added.  What is learned later goes to
``revisions/``.
"""

import errno
import json
import os
from collections.abc import Mapping
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path

from hvhost.record.entries import Json
from hvhost.words.errors import RecordFault

BLOCKS, META, RESULT, PAGE, SAMPLES = "run.hvb", "meta.json", "result.json", "page.txt", "samples.parquet"
MANIFEST, REVISIONS = "manifest.sha256", "revisions"
FREE_MIN = 64 << 20  # bytes that must be free before a run is opened


@dataclass(frozen=True, slots=True)
class RunFolder:
    """The paths of one run."""

    path: Path

    @property
    def name(self) -> str:
        """The folder's name: '<UTC stamp>-<run number>'."""
        return self.path.name

    @property
    def blocks(self) -> Path:
        """The block file."""
        return self.path / BLOCKS

    @property
    def manifest(self) -> Path:
        """The manifest, present once the run is closed or recovered."""
        return self.path / MANIFEST

    @property
    def revisions(self) -> Path:
        """The folder of what was appended after the close."""
        return self.path / REVISIONS

    @property
    def closed(self) -> bool:
        """Whether a manifest closes the folder."""
        return self.manifest.exists()

    @classmethod
    def create(cls, root: Path, run: str, opened_utc_ns: int, meta: Json, texts: Mapping[str, str],
               free_min: int = FREE_MIN) -> "RunFolder":
        """Make a new run folder with ``meta.json`` (from `RunMeta.to_json`) and the given texts (by file name), synced.

        Raises `RecordFault` where the place is not writable, full, or the name is taken; then nothing is left behind
        under the run's name.
        """
        name = f"{stamp(opened_utc_ns)}-{run}"
        final, building = root / name, root / f".{name}.new"
        try:
            root.mkdir(parents=True, exist_ok=True)
            if final.exists():
                raise RecordFault("a new run folder", "the name is taken", str(final), "use another run number")
            _space(root, free_min)
            _clear(building)
            building.mkdir()
            for file, text in {**texts, META: json.dumps(_without_texts(meta), indent=1, default=str)}.items():
                write_synced(building / file, text.encode("utf-8"))
            building.rename(final)
            sync_folder(root)
        except OSError as error:
            raise folder_fault(error, final) from None
        return cls(final)

    @classmethod
    def at(cls, path: Path) -> "RunFolder":
        """Open an existing run folder; raises `RecordFault` where it holds no block file and no META."""
        if not (path / BLOCKS).exists() and not (path / META).exists():
            raise RecordFault(f"a run folder with {BLOCKS}", "none", str(path), "list the runs with: hvhost runs")
        return cls(path)


def _without_texts(meta: Json) -> Json:
    return {key: {k: v for k, v in value.items() if k != "text"} if isinstance(value, Mapping) else value
            for key, value in meta.items()}


def stamp(utc_ns: int) -> str:
    """Return the UTC as it stands in folder names, '20260131T235959Z'."""
    return datetime.fromtimestamp(utc_ns // 1_000_000_000, UTC).strftime("%Y%m%dT%H%M%SZ")


def _space(root: Path, free_min: int) -> None:
    status = os.statvfs(root)
    free = status.f_bavail * status.f_frsize
    if free < free_min:
        raise RecordFault(f"at least {free_min >> 20} MiB free", f"{free >> 20} MiB", str(root),
                          "make room or choose another runs folder")


def _clear(folder: Path) -> None:
    """Remove what an earlier attempt left half made (files only, one level)."""
    if folder.exists():
        for file in folder.iterdir():
            file.unlink()
        folder.rmdir()


def folder_fault(error: OSError, path: Path, what: str = "run folder") -> RecordFault:
    """Say an operating-system error on a run folder (or ``what`` else) as a sentence with its remedy."""
    place = "runs folder" if what == "run folder" else what
    remedies = {
        errno.EACCES: f"give yourself write permission or choose another {place}",
        errno.EPERM: f"give yourself write permission or choose another {place}",
        errno.EROFS: f"the disk is read-only: choose another {place}",
        errno.ENOSPC: f"make room or choose another {place}",
        errno.EDQUOT: f"make room or choose another {place}",
        errno.ENOTDIR: f"a part of the path is a file: choose another {place}",
    }
    return RecordFault(f"a {what} that can be written", error.strerror or str(error), str(path),
                       remedies.get(error.errno or 0, "check the path and the disk"))


def write_synced(path: Path, data: bytes) -> None:
    """Write a whole new file under its name: temporary file, fsync, rename, fsync of the folder."""
    temporary = path.with_name(f".{path.name}.tmp")
    with temporary.open("wb") as file:
        file.write(data)
        file.flush()
        os.fsync(file.fileno())
    temporary.replace(path)
    sync_folder(path.parent)


def sync_folder(path: Path) -> None:
    """Make renames in a folder last."""
    descriptor = os.open(path, os.O_RDONLY | os.O_DIRECTORY)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)
