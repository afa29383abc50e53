"""A record put back through the core: same verdicts, or it says where they part."""

from collections.abc import Callable
from dataclasses import replace
from datetime import datetime
from pathlib import Path

import pytest

from hvhost.bench.file import load_bench
from hvhost.cli.fast import FastRehearsal
from hvhost.cli.plantof import plant_of
from hvhost.cli.run import read
from hvhost.record.blockfile import BlockWriter, read_blocks
from hvhost.record.entries import BlockEntry, Entry, MetaEntry
from hvhost.record.folder import RunFolder
from hvhost.record.replay import replay
from hvhost.standin.params import changed
from hvhost.words.errors import RecordFault

ROOT = Path(__file__).parent.parent.parent
PLAN = """plan: Short
released: {by: laboratory lead, on: 2026-01-12}
current_limit: 2 mA
steps:
  - ramp: {to: 4 kV, rate: 4 kV/s}
  - hold: {name: h, for: 1 s, at_most: 5 s, window: 200 ms, readings: [500 ms]}
"""
SHEET = "sheet: Short\nspecimen: S-1\noperator: someone\n"
RAISED = 20_000  # current code above the overcurrent limit of the demonstration bench (16 383)


def rehearsed(folder: Path, *changes: str, plan: str = PLAN) -> RunFolder:
    """One short run on the demonstration bench, closed, on disk."""
    bench = load_bench(ROOT / "configs" / "demo.bench.yaml")
    (folder / "p.plan.yaml").write_text(plan, encoding="utf-8")
    (folder / "s.sheet.yaml").write_text(SHEET, encoding="utf-8")
    rehearsal = FastRehearsal(bench, changed(plant_of(bench), changes), seed=5, runs=folder / "runs",
                              day=datetime(2026, 3, 1))
    rehearsal.prepare()
    rehearsal.run({"plan": read(folder / "p.plan.yaml"), "plan_file": "p.plan.yaml",
                   "sheet": read(folder / "s.sheet.yaml"), "sheet_file": "s.sheet.yaml"}, 300.0)
    (only,) = (path for path in (folder / "runs").iterdir() if not path.name.startswith("."))
    return RunFolder.at(only)


@pytest.fixture(scope="module")
def quiet(tmp_path_factory: pytest.TempPathFactory) -> RunFolder:
    """A run in which nothing happens but the plan."""
    return rehearsed(tmp_path_factory.mktemp("quiet"), "specimen.strength_v=90 kV")


def rewritten(folder: RunFolder, to: Path, change: Callable[[int, tuple[int, ...]], tuple[int, ...]]) -> RunFolder:
    """The same record with the codes of some blocks changed and every check redone; blocks count from 0."""
    to.mkdir()
    entries = [e for e in read_blocks(folder.blocks) if isinstance(e, Entry)]
    meta = entries[0].content
    assert isinstance(meta, MetaEntry)
    number = 0
    with (to / folder.blocks.name).open("wb") as file:
        writer = BlockWriter(file, mark=int(meta.data["tag"]), signs=str(meta.data["signs"]))
        for entry in entries:
            content = entry.content
            if isinstance(content, BlockEntry):
                codes = change(number, content.block.codes)
                content = BlockEntry(content.arrival_s, replace(content.block, codes=codes))
                number += 1
            writer.put(content)
    return RunFolder(to)


def raised(pairs: range) -> Callable[[int, tuple[int, ...]], tuple[int, ...]]:
    """Lift the current readback of these pairs of the 170th block, which lies in the hold."""
    def change(number: int, codes: tuple[int, ...]) -> tuple[int, ...]:
        if number != 170:
            return codes
        return tuple(RAISED if at % 2 and at // 2 in pairs else code for at, code in enumerate(codes))

    return change


def test_a_quiet_run_gives_the_same_verdicts_and_the_same_lines(quiet: RunFolder) -> None:
    """Nothing parts where nothing was changed."""
    found = replay(quiet)
    assert found.parted == ""
    assert found.verdicts == 0
    assert found.pairs > 5_000
    assert dict(found.interfering) == found.interfering_recorded


def test_a_breakdown_gives_the_same_verdict_at_the_same_sample(tmp_path: Path) -> None:
    """The verdict that stopped the run comes again, and so does the line that carried it."""
    plan = PLAN + "  - ramp: {name: higher, to: 22 kV, rate: 5 kV/s}\n"
    found = replay(rehearsed(tmp_path, "specimen.strength_v=9 kV", plan=plan))
    assert found.parted == ""
    assert found.verdicts == 1


def test_three_raised_readbacks_part_the_replay_and_it_says_where(quiet: RunFolder, tmp_path: Path) -> None:
    """An overcurrent that lasts is a verdict which the record does not have."""
    found = replay(rewritten(quiet, tmp_path / "three", raised(range(10, 13))))
    assert "overcurrent" in found.parted
    assert "pairs" in found.parted


def test_one_raised_readback_changes_only_the_count_of_interfering_samples(quiet: RunFolder, tmp_path: Path) -> None:
    """One sample is interference: counted, not acted on."""
    before = replay(quiet)
    found = replay(rewritten(quiet, tmp_path / "one", raised(range(10, 11))))
    assert found.parted == ""
    assert (found.pairs, found.verdicts) == (before.pairs, before.verdicts)
    assert found.interfering["overcurrent"] == before.interfering.get("overcurrent", 0) + 1
    assert found.interfering != found.interfering_recorded


def test_a_rehearsal_done_twice_gives_the_same_bytes(quiet: RunFolder, tmp_path: Path) -> None:
    """Bench, plan, sheet, seed and day decide every byte of the record."""
    again = rehearsed(tmp_path, "specimen.strength_v=90 kV")
    for name in ("run.hvb", "samples.parquet", "result.json", "page.txt", "manifest.sha256", "meta.json"):
        assert (again.path / name).read_bytes() == (quiet.path / name).read_bytes(), name


def test_a_record_without_meta_is_refused_by_a_sentence(tmp_path: Path) -> None:
    """A file that is none of ours is named, not traced."""
    (tmp_path / "run.hvb").write_bytes(b"\0" * 100)
    with pytest.raises(RecordFault, match="META"):
        replay(RunFolder(tmp_path))
