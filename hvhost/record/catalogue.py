"""The catalogue over all runs, rebuilt from the folders each time: the folders are the truth."""

import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from hvhost.record.amend import AMENDMENT, INSPECTION, amended_sheet
from hvhost.record.entries import Json
from hvhost.record.folder import BLOCKS, META, RESULT, RunFolder
from hvhost.record.manifest import revisions_of
from hvhost.words.errors import CommandRefused

DELIVERED = "delivered"  # kind of the revision that says where a result went


@dataclass(frozen=True, slots=True, kw_only=True)
class RunSummary:
    """One line of the catalogue; texts are '' and numbers None where the run does not tell."""

    path: Path
    run: str
    kind: str
    opened_utc_ns: int
    specimen: str
    order: str
    operator: str
    plan: str
    bench: str
    outcome: str  # an Outcome's word, 'open' where nothing closed it yet, 'damaged' where META cannot be read
    verdict: str  # 'pass', 'fail', 'not decided', ''
    highest_v: float | None
    breakdown_v: float | None
    time_on_s: float | None
    tag: int
    revisions: int
    delivery: str  # of its result: 'delivered', 'due', '' where the bench asked for none

    @property
    def to_json(self) -> dict[str, Any]:
        """The summary as plain JSON."""
        return {name: str(value) if isinstance(value := getattr(self, name), Path) else value
                for name in self.__slots__}


def _read_json(path: Path) -> Json:
    try:
        data = json.loads(path.read_bytes())
        return data if isinstance(data, dict) else {}
    except (OSError, ValueError):
        return {}


def summary_of(folder: RunFolder) -> RunSummary:
    """Summarise one folder from its small files; never raises for what they lack."""
    meta, revisions = _read_json(folder.path / META), revisions_of(folder)
    result = _latest_result(folder, revisions)
    sheet, plan, bench = meta.get("sheet") or {}, meta.get("plan") or {}, meta.get("bench") or {}
    operator = str(meta.get("operator", ""))
    if revisions:
        amended = amended_sheet({**sheet, "operator": operator}, revisions)
        sheet, operator = amended, str(amended["operator"])
    return RunSummary(
        path=folder.path, run=str(meta.get("run", folder.name)), kind=str(meta.get("kind", "")),
        opened_utc_ns=int(meta.get("opened_utc_ns", 0)), specimen=str(sheet.get("specimen", "")),
        order=str(sheet.get("order") or ""), operator=operator, plan=str(plan.get("title") or plan.get("file", "")),
        bench=str(bench.get("name") or bench.get("file", "")),
        outcome=str(result.get("outcome", "open")) if meta else "damaged", verdict=str(result.get("verdict", "")),
        highest_v=result.get("highest_v"), breakdown_v=result.get("breakdown_v"), time_on_s=result.get("time_on_s"),
        tag=int(meta.get("tag", 0)), revisions=len(revisions), delivery=delivery_of(bench, folder, revisions))


def _latest_result(folder: RunFolder, revisions: tuple[Json, ...]) -> Json:
    """Return the result, or that of the last revision that carries one."""
    for revision in reversed(revisions):
        data = revision.get("data")
        result = data.get("result") if isinstance(data, dict) else None
        if isinstance(result, dict):
            return result
    return _read_json(folder.path / RESULT)


def delivery_of(bench: Json, folder: RunFolder, revisions: tuple[Json, ...]) -> str:
    """Return 'delivered' where a result was handed over after the last correction, 'due', '' where none was asked."""
    if not bench.get("archive") or not folder.closed:
        return ""
    for revision in reversed(revisions):
        if revision.get("kind") == DELIVERED:
            return DELIVERED
        if revision.get("kind") in (AMENDMENT, INSPECTION):
            break
    return "due"


def list_runs(root: Path) -> tuple[RunSummary, ...]:
    """Return every run under a runs folder, oldest first; a folder without a run is passed over."""
    if not root.is_dir():
        return ()
    folders = sorted(path for path in root.iterdir()
                     if not path.name.startswith(".") and ((path / BLOCKS).exists() or (path / META).exists()))
    return tuple(summary_of(RunFolder(path)) for path in folders)


def unclosed(root: Path) -> tuple[RunFolder, ...]:
    """Return the runs that nothing closed, oldest first: those a crash left open, and one that is being written."""
    return tuple(RunFolder(summary.path) for summary in list_runs(root) if not RunFolder(summary.path).closed)


def find_run(root: Path, name: str) -> RunFolder:
    """Return the run whose folder name, run number or unique beginning of either is ``name``, 'last', or a folder."""
    if "/" in name and ((folder := Path(name).expanduser()) / BLOCKS).exists():
        return RunFolder(folder.absolute())
    runs = list_runs(root)
    if name == "last" and runs:
        return RunFolder(runs[-1].path)
    exact = [r for r in runs if name in (r.path.name, r.run)]
    found = exact or [r for r in runs if r.path.name.startswith(name) or r.run.startswith(name)]
    if len(found) == 1:
        return RunFolder(found[0].path)
    raise CommandRefused(f"one run named {name!r}", f"{len(found)}", str(root), "list the runs with: hvhost runs")
