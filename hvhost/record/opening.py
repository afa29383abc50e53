"""Opens a run's record: everything that was fixed, written and synced before anything may be armed."""

from collections.abc import Callable, Mapping
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any

from hvhost import __version__
from hvhost.bench.model import Bench, CutMeans
from hvhost.plan.passing import Preflight
from hvhost.plan.plan import Plan, RunSheet
from hvhost.record.folder import RunFolder
from hvhost.record.meta import RecordedScale, RunMeta, jsonable
from hvhost.record.recorder import Recording
from hvhost.supervisor.core import Core
from hvhost.supervisor.runs import RunSpec
from hvhost.wire.greeting import Greeting


@dataclass(frozen=True, slots=True, kw_only=True)
class Opened:
    """A run's folder with its recorder running."""

    folder: RunFolder
    recording: Recording


def open_record(core: Core, spec: RunSpec, checked: Preflight, plan: Plan | None, sheet: RunSheet, *,
                reasons: tuple[Mapping[str, Any], ...], root: Path, utc_ns: int, now_s: float, rehearsal: bool,
                opener: Callable[..., Recording], on_failed: Callable[[str], None]) -> Opened:
    """Make the folder and the block file with its META entry; raises `RecordFault`, leaving nothing half done."""
    assert core.greeting is not None
    meta = meta_of(core, spec, checked, plan, sheet, reasons=reasons, utc_ns=utc_ns, now_s=now_s,
                   rehearsal=rehearsal).to_json()
    texts = {"bench.yaml": core.bench.text, "sheet.yaml": sheet.text}
    if plan is not None:
        texts["plan.yaml"] = plan.text
    folder = RunFolder.create(root, spec.run_id, utc_ns, meta, texts)
    recording = opener(folder, meta, tag=spec.tag, signs=core.greeting.info.signs, on_failed=on_failed)
    return Opened(folder=folder, recording=recording)


def meta_of(core: Core, spec: RunSpec, checked: Preflight, plan: Plan | None, sheet: RunSheet, *,
            reasons: tuple[Mapping[str, Any], ...], utc_ns: int, now_s: float, rehearsal: bool) -> RunMeta:
    """The META entry of a run about to be opened."""
    greeting, bench = core.greeting, core.bench
    assert greeting is not None
    info = greeting.info
    return RunMeta(
        run=spec.run_id, tag=spec.tag, kind="rehearsal" if rehearsal else spec.kind, opened_utc_ns=utc_ns,
        opened_mono_s=now_s, operator=spec.operator, polarity=bench.polarity, tick_hz=info.tick_hz,
        sample_ticks=info.sample_ticks, signs=info.signs, voltage=RecordedScale.of(bench.voltage.monitor),
        current=RecordedScale.of(bench.current.monitor), v_program=RecordedScale.of(bench.voltage.program),
        i_program=RecordedScale.of(bench.current.program), bench=_bench(bench, rehearsal=rehearsal),
        plan=None if plan is None else {
            "file": plan.file, "text": plan.text, "sha256": plan.sha256, "title": plan.title,
            "released_by": plan.release.by if plan.release else ""},
        sheet={"file": sheet.file, "text": sheet.text, "sha256": sheet.sha256, "specimen": sheet.specimen,
               "order": sheet.order, "operator": sheet.operator, "second_person": sheet.second_person,
               "environment": jsonable(sheet.environment), "values": dict(sheet.values)},
        hashes=dict(checked.hashes), settings=greeting.settings.values if greeting.settings else (),
        greeting=_greeting(greeting), program=jsonable(spec.program), reasons=tuple(reasons),
        notes=tuple(jsonable(f) for f in checked.findings if f not in checked.reasons),
        supervisor_state=core.opening_state(), software=f"hvhost {__version__}")


def _bench(bench: Bench, *, rehearsal: bool) -> dict[str, Any]:
    return {"file": bench.file, "text": bench.text, "sha256": bench.sha256, "name": bench.name,
            "bandwidth_hz": bench.bandwidth_hz, "ripple_hz": bench.ripple_hz, "own_f": bench.cable_f,
            "calibrated": bench.calibrated, "touch_v": bench.touch_v, "arm_input": bench.arm_input,
            "programming_only": bench.programming_only, "monitor_at_specimen": bench.monitor_at_specimen,
            "supply_stays_powered": CutMeans.RELAY not in bench.cut_path,
            "monitor_powered_after_cut": bench.monitor_powered_after_cut,
            "inhibits_without_mcu": bench.inhibits_when_mcu_absent,
            "archive": bench.archive is not None and (bench.archive.rehearsals or not rehearsal)}


def _greeting(greeting: Greeting) -> dict[str, Any]:
    info = asdict(greeting.info)
    return {**info, "fw": info["firmware"], "session": greeting.session, "lease_s": greeting.lease_s}
