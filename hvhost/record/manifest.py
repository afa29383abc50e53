"""The manifest that closes a folder, the chain of revisions behind it, and the check of both."""

import hashlib
import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from hvhost.record.entries import Json
from hvhost.record.folder import BLOCKS, MANIFEST, RunFolder, folder_fault, sync_folder, write_synced
from hvhost.record.meta import jsonable
from hvhost.words.errors import RecordFault


def file_hash(path: Path) -> str:
    """Return the SHA-256 of a file in lower-case hexadecimal."""
    with path.open("rb") as file:
        return hashlib.file_digest(file, "sha256").hexdigest()


def _files(folder: RunFolder) -> list[Path]:
    """The files that a manifest covers: every finished one of the folder itself."""
    return sorted(path for path in folder.path.iterdir()
                  if path.is_file() and path.name != MANIFEST and not path.name.startswith("."))


def write_manifest(folder: RunFolder, remarks: tuple[str, ...] = ()) -> Path:
    """Close a folder: SHA-256 of each file in the form of ``sha256sum``, remarks as comment lines."""
    lines = [f"# {remark}\n" for remark in remarks]
    lines += [f"{file_hash(path)}  {path.name}\n" for path in _files(folder)]
    write_synced(folder.manifest, "".join(lines).encode("utf-8"))
    return folder.manifest


def named_in(folder: RunFolder) -> dict[str, str]:
    """Return file name -> SHA-256 as the manifest has them; empty where there is none."""
    if not folder.closed:
        return {}
    lines = (line.partition("  ") for line in folder.manifest.read_text("utf-8").splitlines() if line[:1] != "#")
    return {name: digest for digest, _, name in lines}


def as_closed(folder: RunFolder, name: str) -> bool:
    """Whether a file of the folder is the one that was closed."""
    digest = named_in(folder).get(name)
    return digest is not None and (folder.path / name).is_file() and file_hash(folder.path / name) == digest


@dataclass(frozen=True, slots=True, kw_only=True)
class Check:
    """What a folder's manifest and revisions say: ``closed``, and every file that is not as it was."""

    closed: bool
    faults: tuple[str, ...]

    @property
    def sound(self) -> bool:
        """Whether the folder is closed and nothing in it changed since."""
        return self.closed and not self.faults


def check_folder(folder: RunFolder) -> Check:
    """Compare every file with the manifest and follow the chain of revisions."""
    faults: list[str] = []
    named = named_in(folder)
    if folder.closed:
        faults += [f"{path.name}: not in the manifest" for path in _files(folder) if path.name not in named]
    for name, digest in named.items():
        path = folder.path / name
        if not path.exists():
            faults.append(f"{name}: missing")
        elif file_hash(path) != digest:
            faults.append(f"{name}: changed since the close")
    return Check(closed=folder.closed, faults=(*faults, *_chain_faults(folder)))


def _chain_faults(folder: RunFolder) -> list[str]:
    faults: list[str] = []
    expected: str | None = None
    for number, path in enumerate(_revision_files(folder), start=1):
        try:
            data = json.loads(path.read_bytes())
            previous, its_number = data["previous"], data["number"]
        except (ValueError, KeyError, TypeError):
            faults.append(f"revisions/{path.name}: not readable")
            expected = file_hash(path)
            continue
        if its_number != number:
            faults.append(f"revisions/{path.name}: number {number} expected")
        if expected is None:
            firsts = {_first_previous(folder), file_hash(folder.blocks) if folder.blocks.exists() else ""}
            sound = previous in firsts
        else:
            sound = previous == expected
        if not sound:
            faults.append(f"revisions/{path.name}: does not follow the one before")
        expected = file_hash(path)
    return faults


# ---------------------------------------------------------------- revisions


def _revision_files(folder: RunFolder) -> list[Path]:
    return sorted(folder.revisions.glob("[0-9][0-9][0-9][0-9]-*.json")) if folder.revisions.is_dir() else []


def _first_previous(folder: RunFolder) -> str:
    if folder.closed:
        return file_hash(folder.manifest)
    return file_hash(folder.path / BLOCKS) if folder.blocks.exists() else ""


def revisions_of(folder: RunFolder) -> tuple[Json, ...]:
    """Return the revisions in order; one that cannot be read is returned as its file name under 'unreadable'."""
    found: list[Json] = []
    for path in _revision_files(folder):
        try:
            found.append(dict(json.loads(path.read_bytes())))
        except (ValueError, TypeError):
            found.append({"kind": "unreadable", "data": {"file": path.name}})
    return tuple(found)


def append_revision(folder: RunFolder, kind: str, data: Json, *, utc_ns: int) -> Path:
    """Add what was learned after the close as the next revision; equal data of the same kind is added once.

    Raises `RecordFault` where the folder cannot be written.  Nothing that exists is changed.
    """
    if not kind.isascii() or not kind.replace("-", "").isalnum():
        raise RecordFault("a revision kind of letters, digits and dashes", repr(kind))
    plain: Any = jsonable(data)
    files = _revision_files(folder)
    try:
        for path, known in zip(files, revisions_of(folder), strict=True):
            if known.get("kind") == kind and known.get("data") == plain:
                return path
        folder.revisions.mkdir(exist_ok=True)
        sync_folder(folder.path)
        number = len(files) + 1
        previous = file_hash(files[-1]) if files else _first_previous(folder)
        path = folder.revisions / f"{number:04d}-{kind}.json"
        revision = {"kind": kind, "number": number, "previous": previous, "utc_ns": utc_ns, "data": plain}
        write_synced(path, json.dumps(revision, indent=1, default=str).encode("ascii"))
    except OSError as error:
        raise folder_fault(error, folder.revisions) from None
    return path
