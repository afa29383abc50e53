"""Closes a run's folder: export, result, page, form at rest, manifest: ``python -m hvhost.report.closing RUNDIR``.

A process of its own, so that nothing here can hold the daemon; the daemon only waits for its exit.  Every act is
repeatable, and the manifest comes last: a crash in between leaves a folder that recovery closes.
"""

import json
import sys
from dataclasses import dataclass
from pathlib import Path

from hvhost.measure.result import Result, evaluate
from hvhost.record.data import RunData, load_run
from hvhost.record.export import export_in_child
from hvhost.record.folder import PAGE, RESULT, RunFolder, folder_fault, write_synced
from hvhost.record.manifest import check_folder, revisions_of, write_manifest
from hvhost.record.recovery import being_written, recover_run
from hvhost.record.repack import repack
from hvhost.report.page import page
from hvhost.report.resultfile import corrected, result_document
from hvhost.words.errors import HvhostError, RecordFault


@dataclass(frozen=True, slots=True, kw_only=True)
class Closed:
    """What closing gave: the result and remarks (an export that failed, a file left as it was found)."""

    folder: RunFolder
    result: Result
    remarks: tuple[str, ...]


def damage_of(run: RunData) -> tuple[str, ...]:
    """Return a run's damages as sentences."""
    return tuple(f"{d.kind} at byte {d.offset}: {d.text}" for d in run.damage)


def page_of(folder: RunFolder) -> str:
    """Return the page of a run as it stands now, its revisions and the state of its files included."""
    run, revisions = load_run(folder), revisions_of(folder)
    meta, result = corrected(run.meta, evaluate(run), revisions)
    return page(meta, result, check_folder(folder), revisions, damage_of(run))


def close_run(folder: RunFolder, *, recovered: bool = False) -> Closed:
    """Add export, result and page, put the block file at rest, write the manifest.

    The block file of a recovered run stays as it was found: it is evidence.  Raises `RecordFault` where the run
    cannot be read, is closed already or is still being written.
    """
    if folder.closed:
        raise RecordFault("a run that is not closed yet", "a manifest", str(folder.path))
    if being_written(folder):
        raise RecordFault("a run that nobody writes", "its recorder still runs", str(folder.path))
    run = load_run(folder)
    result = evaluate(run)
    remarks = []
    try:
        document = result_document(run.meta, result, revisions_of(folder))
        write_synced(folder.path / RESULT, json.dumps(document, indent=1, allow_nan=False).encode("ascii"))
        write_synced(folder.path / PAGE, page(run.meta, result, None, revisions_of(folder), damage_of(run)).encode())
        exported = export_in_child(folder)
        if exported.fault:
            remarks.append(f"no Parquet: {exported.fault}")
        if not recovered and not run.damage:
            done = repack(folder.blocks)
            remarks.append(f"run.hvb as written: sha256 {done.live_sha256}, {done.before} bytes")
        write_manifest(folder, (*remarks, *(("closed by recovery",) if recovered else ())))
    except OSError as error:
        raise folder_fault(error, folder.path) from None
    return Closed(folder=folder, result=result, remarks=tuple(remarks))


def recover_and_close(folder: RunFolder, *, utc_ns: int) -> Closed | None:
    """Recover an unclosed run and close its folder; None where it was closed already."""
    if not recover_run(folder, utc_ns=utc_ns, seal=False).done:
        return None
    return close_run(folder, recovered=True)


def main(arguments: list[str]) -> int:
    """Close one run folder, or recover it first (``--recover UTC_NS``); a sentence and code 7 where that fails."""
    recovering = len(arguments) == 3 and arguments[0] == "--recover" and arguments[1].isdecimal()
    if not recovering and len(arguments) != 1:
        print("usage: python -m hvhost.report.closing [--recover UTC_NS] RUNDIR", file=sys.stderr)
        return 2
    try:
        folder = RunFolder.at(Path(arguments[-1]))
        closed = recover_and_close(folder, utc_ns=int(arguments[1])) if recovering else close_run(folder)
    except HvhostError as error:
        print(error, file=sys.stderr)
        return error.exit_code
    if closed is not None:
        print(json.dumps({"verdict": closed.result.verdict.value, "outcome": closed.result.outcome,
                          "remarks": closed.remarks}))
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
