"""Closes what a crash left open: the original stays as it was found, what was found out is a revision.

Every act is repeatable and takes its final name in one step, so a crash during recovery changes nothing but that it
must be done again; done twice it does nothing more.
"""

import fcntl
import os
from dataclasses import dataclass
from pathlib import Path

from hvhost.record.blockfile import open_buffer
from hvhost.record.data import Read, read_all
from hvhost.record.entries import DamageKind, Outcome
from hvhost.record.folder import RunFolder
from hvhost.record.manifest import append_revision, file_hash, revisions_of, write_manifest
from hvhost.record.spans import Blocks
from hvhost.words.errors import RecordFault

DAMAGES_LISTED = 100


@dataclass(frozen=True, slots=True, kw_only=True)
class Recovered:
    """What recovery found: ``done`` False where the run was closed already; damage as sentences, '' outcome unknown."""

    folder: RunFolder
    done: bool
    outcome: str
    pairs: int
    damage: tuple[str, ...]


def being_written(folder: RunFolder) -> bool:
    """Whether a recorder holds the block file."""
    if not folder.blocks.exists():
        return False
    descriptor = os.open(folder.blocks, os.O_RDONLY | os.O_CLOEXEC)
    try:
        fcntl.flock(descriptor, fcntl.LOCK_SH | fcntl.LOCK_NB)
    except BlockingIOError:
        return True
    finally:
        os.close(descriptor)
    return False


def recover_run(folder: RunFolder, *, utc_ns: int, seal: bool = True) -> Recovered:
    """Record how an unclosed run ended and what its block file lacks; with ``seal``, write the manifest at last.

    A caller that adds an export or a result first leaves ``seal`` out and calls `seal_recovered` after.  Raises
    `RecordFault` while a recorder still writes the run, or where the folder cannot be written.
    """
    if folder.closed:
        return Recovered(folder=folder, done=False, outcome=_known_outcome(folder), pairs=0, damage=())
    if being_written(folder):
        raise RecordFault("a run that nobody writes", "its recorder still runs", str(folder.path),
                          "end the run first")
    found, blocks = read_all(open_buffer(folder.blocks)) if folder.blocks.exists() else (Read(), None)
    data = _finding(folder, found, blocks)
    append_revision(folder, "recovered", data, utc_ns=utc_ns)
    if seal:
        seal_recovered(folder)
    return Recovered(folder=folder, done=True, outcome=str(data["outcome"]), pairs=int(str(data["pairs"])),
                     damage=tuple(f"{d.kind} at byte {d.offset}: {d.text}" for d in found.damage))


def seal_recovered(folder: RunFolder) -> Path:
    """Write the manifest of a recovered run."""
    return write_manifest(folder, ("closed by recovery",))


def _finding(folder: RunFolder, found: Read, blocks: Blocks | None) -> dict[str, object]:
    """Say what is there, without the time, so that the same file gives the same finding."""
    pairs = int(blocks.first[-1]) if blocks is not None else 0
    ended = found.end is not None
    last = blocks.head[-1] if blocks is not None and len(blocks.head) else None
    whole = folder.blocks.exists()
    return {
        "outcome": found.end["outcome"] if found.end is not None else Outcome.INTERRUPTED.value,
        "why": "the recorder ended, the folder was not closed" if ended else "nothing closed this run",
        "pairs": pairs, "blocks": len(blocks.head) if blocks is not None else 0,
        "last_index": int(last["index"]) + int(last["pairs"]) - 1 if last is not None else None,
        "last_arrival_s": float(last["arrival"]) if last is not None else None,
        "last_state": int(last["state"]) if last is not None else None,
        "block_file": {"bytes": folder.blocks.stat().st_size if whole else 0,
                       "sha256": file_hash(folder.blocks) if whole else ""},
        "entries_lost": sum(d.entries for d in found.damage) + found.lost,
        "torn": any(d.kind is DamageKind.TORN for d in found.damage),
        "damage": [f"{d.kind} at byte {d.offset}: {d.text}" for d in found.damage[:DAMAGES_LISTED]],
        "damages": len(found.damage),
    }


def _known_outcome(folder: RunFolder) -> str:
    for revision in revisions_of(folder):
        if revision.get("kind") == "recovered":
            return str(revision.get("data", {}).get("outcome", ""))
    return ""
