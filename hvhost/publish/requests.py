"""What clients may ask of a station, by method name; every one is synchronous and refused whole or done.

No request names a path: files are read by the client and sent as text, so nothing from outside touches a file here.
"""

import secrets
from base64 import b64decode
from binascii import Error as Base64Error
from collections.abc import Callable, Mapping
from dataclasses import replace
from datetime import UTC, date, datetime
from typing import TYPE_CHECKING, Any

from hvhost.plan.language import read_plan
from hvhost.plan.passing import History, Preflight
from hvhost.plan.plan import Plan, RunSheet
from hvhost.plan.preflight import preflight, preflight_direct
from hvhost.plan.sheet import sheet_from, sheet_of
from hvhost.record.folder import RunFolder
from hvhost.record.opening import open_record
from hvhost.record.remembered import RememberedRuns
from hvhost.supervisor import arming
from hvhost.supervisor.commands import COMMANDS, open_run
from hvhost.supervisor.runs import RunSpec, Stage
from hvhost.words.errors import CommandRefused, FileFault
from hvhost.words.findings import Finding, refused

if TYPE_CHECKING:
    from hvhost.publish.station import Station

Params = Mapping[str, Any]
TEXT_MAX = 200_000  # characters of a plan or sheet in base64
PLAIN = frozenset({"arm", "cancel", "set", "lower", "cut", "reset", "seat.take", "seat.release", "seat.acknowledge",
                   "seat.check", "commission"})


class Requests:
    """The methods of one station."""

    def __init__(self, station: "Station") -> None:
        self.station = station
        self.remembered = RememberedRuns(station.runs_root)
        self.tag: Callable[[], int] = lambda: secrets.randbits(32)
        self._methods: dict[str, Callable[[Params, str], dict[str, Any]]] = {
            "preflight": self._preflight, "run": self._run, "direct": self._direct, "status": self._status,
            "reply": self._reply, "settings": self._settings}

    @property
    def names(self) -> tuple[str, ...]:
        """Every method."""
        return tuple(sorted({*self._methods, *PLAIN}))

    def handle(self, method: str, params: Params, who: str) -> dict[str, Any]:
        """Carry out one request."""
        if method in PLAIN and method in COMMANDS:
            return self.station.command(method, params, who)
        act = self._methods.get(method)
        if act is None:
            raise CommandRefused(f"one of {', '.join(self.names)}", repr(method)[:60], "method")
        return act(params, who)

    # ------------------------------------------------------------ runs

    def _read(self, params: Params) -> tuple[Plan, RunSheet]:
        name = _text(params, "plan_file", 200)
        plan, findings = read_plan(name, _file(params, "plan"))
        if plan is None:
            raise FileFault("a plan without faults", f"{len(refused(findings))} faults", name,
                            "'hvhost check' lists them", findings=tuple(f.text for f in findings))
        return plan, self._sheet(params)

    def _sheet(self, params: Params) -> RunSheet:
        if params.get("sheet"):
            sheet = sheet_from(_text(params, "sheet_file", 200), _file(params, "sheet"))
            typed = _text(params, "specimen", 200)
            if typed and typed != sheet.specimen:
                raise CommandRefused(f"the run sheet's specimen {sheet.specimen!r}", f"{typed!r} as typed", "specimen",
                                     "correct one of them: this may be a wrong label")
            return sheet
        values = params.get("values") or {}
        if not isinstance(values, Mapping):
            raise CommandRefused("an object", type(values).__name__, "values")
        return sheet_of(_text(params, "specimen", 200), operator=str(params.get("operator", ""))[:200],
                        repeat_of=str(params.get("repeat_of", ""))[:500],
                        values={str(k): str(v) for k, v in values.items()})

    def _check(self, plan: Plan, sheet: RunSheet) -> Preflight:
        core = self.station.core
        if core.greeting is None:
            return preflight(plan, sheet, core.bench, history=self.history(), today=self._today())
        info = core.greeting.info
        return preflight(plan, sheet, core.bench, history=self.history(), today=self._today(), tick_hz=info.tick_hz,
                         queue=info.queue)

    def _on_this_machine(self, checked: Preflight) -> Preflight:
        """The same with what this machine adds; it is no part of what is hashed."""
        found = self.station.machine.findings()
        return replace(checked, findings=(*checked.findings, *found)) if found else checked

    def _today(self) -> date:
        return datetime.fromtimestamp(self.station.clock.utc_ns() // 1_000_000_000, UTC).date()

    def history(self) -> History:
        """What earlier runs of this bench tell; rehearsals do not count for real runs."""
        runs = [run for run in self.remembered.runs()
                if (run.kind == "rehearsal") == self.station.rehearsal and run.time_on_s]
        return History(used_specimens=frozenset(run.specimen for run in runs),
                       last_specimen=max(runs, key=lambda r: r.opened_utc_ns).specimen if runs else "",
                       interlock_opened_since=self.station.core.interlock_opened)

    def _preflight(self, params: Params, who: str) -> dict[str, Any]:
        plan, sheet = self._read(params)
        return _checked(self._on_this_machine(self._check(plan, sheet)))

    def _run(self, params: Params, who: str) -> dict[str, Any]:
        self.station.core.seat.require(str(params.get("ticket", "")))
        plan, sheet = self._read(params)
        checked = self._check(plan, sheet)
        self._void_changed(checked, who)
        return self._open("plan", plan.title, plan, sheet, checked, params, who)

    def _void_changed(self, checked: Preflight, who: str) -> None:
        """Another plan or sheet than the one that is prepared or armed voids that one; raises where it was armed."""
        run = self.station.core.run
        if run is None or run.stage not in (Stage.PREPARED, Stage.ARMED) or run.spec.digest == checked.digest:
            return
        armed = run.stage is Stage.ARMED
        self.station.command("cancel", {"why": f"the run sheet or the plan was changed by {who}"}, who)
        self.station.after()
        if armed:
            raise CommandRefused("the plan and the run sheet that were armed", "others: the arm is void", "run",
                                 "run the changed ones when the record of the cancelled run is closed")

    def _direct(self, params: Params, who: str) -> dict[str, Any]:
        core = self.station.core
        core.seat.require(str(params.get("ticket", "")))
        sheet = self._sheet(params)
        checked = preflight_direct(core.bench, sheet, today=self._today())
        return self._open("direct", "direct run", None, sheet, checked, params, who)

    def _open(self, kind: str, title: str, plan: Plan | None, sheet: RunSheet, checked: Preflight, params: Params,
              who: str) -> dict[str, Any]:
        station, core = self.station, self.station.core
        checked = self._on_this_machine(checked)
        if checked.program is None or not checked.passed:
            raise FileFault("a preflight without faults", f"{len(refused(checked.findings))} faults", title,
                            "'hvhost check' lists them", findings=tuple(f.text for f in checked.findings))
        station.machine.require_room()
        given = self._reasons(checked, params, who)
        hindered = [o for o in arming.obstacles(core) if o.startswith(("link", "permission", "what the MCU"))]
        if hindered or (core.run is not None and core.run.stage is not Stage.CLOSED) or station.recording is not None:
            raise CommandRefused("an idle, greeted bench with no open run", "; ".join(hindered) or "a run is open",
                                 "run", "'hvhost status' says what hinders it" if hindered else
                                 "wait for its end, or cancel it")
        utc_ns, now_s = station.clock.utc_ns(), station.clock.now_s()
        operator = sheet.operator or str(params.get("operator", "")) or who
        spec = RunSpec(run_id=self._run_id(utc_ns), kind=kind, plan=title, specimen=sheet.specimen,
                       operator=operator, tag=self.tag(), program=checked.program, digest=checked.digest,
                       reasons=tuple(f"{r['what']}: {r['reason']} ({r['by']})" for r in given))
        opened = open_record(core, spec, checked, plan, sheet, reasons=given, root=station.runs_root, utc_ns=utc_ns,
                             now_s=now_s, rehearsal=station.rehearsal, opener=station.openers,
                             on_failed=station.record_failed)
        station.begin_record(opened)
        open_run(core, spec, now_s)
        return {"run": spec.run_id, "folder": str(opened.folder.path), "digest": spec.digest, "title": title,
                "specimen": sheet.specimen, "v_highest": checked.program.v_highest,
                "duration_s": checked.program.duration_s, **_checked(checked)}

    def _reasons(self, checked: Preflight, params: Params, who: str) -> tuple[dict[str, Any], ...]:
        """A reason with a name for each finding that needs one; raises naming those without."""
        reason = str(params.get("reason", "")).strip()[:1000]
        by = str(params.get("reason_by", "")).strip()[:200] or who
        if checked.reasons and not reason:
            raise CommandRefused("a reason for: " + "; ".join(f.text for f in checked.reasons), "none", "run",
                                 "give one with --reason TEXT; it goes on the record with your name")
        return tuple({"grade": str(f.grade), "file": f.file, "line": f.line, "what": f.what, "topic": _topic(f),
                      "reason": reason, "by": by} for f in checked.reasons)

    def _run_id(self, utc_ns: int) -> str:
        """A short number that people can type: the bench's runs of the day, counted."""
        day = datetime.fromtimestamp(utc_ns // 1_000_000_000, UTC).strftime("%y%m%d")
        root = self.station.runs_root
        taken = {path.name.rpartition("-")[2] for path in root.glob("*-*")} if root.exists() else set()
        number = 1
        while f"{day}n{number}" in taken:
            number += 1
        return f"{day}n{number}"

    def folder_of_tag(self, tag: int) -> RunFolder | None:
        """The run whose arm carried this tag."""
        for run in self.remembered.runs():
            if run.tag == tag:
                return RunFolder.at(run.path)
        return None

    # ------------------------------------------------------------ looking

    def _status(self, params: Params, who: str) -> dict[str, Any]:
        run = self.station.core.run
        return {"snapshot": self.station.snapshot().to_json(), "obstacles": arming.obstacles(self.station.core),
                "stage": str(run.stage) if run else "", "outcome": str(run.outcome) if run and run.outcome else "",
                "why": run.why if run else "", "run": run.spec.run_id if run else "",
                "folder": self.station.composer.folder, "runs_folder": str(self.station.runs_root.absolute()),
                "arm_input": self.station.core.bench.arm_input, "closing": self.station.closing,
                "verdict": self.station.composer.verdict_text, "recording": self.station.recording is not None}

    def _reply(self, params: Params, who: str) -> dict[str, Any]:
        ticket = params.get("ticket_number")
        return {"reply": self.station.core.replies.get(ticket, "") if isinstance(ticket, int) else ""}

    def _settings(self, params: Params, who: str) -> dict[str, Any]:
        core = self.station.core
        return {"link": str(core.state.link), "text": core.link_text,
                "findings": [f.text for f in core.settings_findings],
                "blank": core.greeting is not None and core.greeting.settings is None}


def _text(params: Params, key: str, longest: int = TEXT_MAX) -> str:
    text = params.get(key, "")
    if not isinstance(text, str) or len(text) > longest:
        raise CommandRefused(f"text of at most {longest} characters", type(text).__name__, key)
    return text


def _file(params: Params, key: str) -> str:
    """The text of a file, sent as base64 of UTF-8 so that a request stays one printable line."""
    try:
        return b64decode(_text(params, key), validate=True).decode("utf-8")
    except (Base64Error, UnicodeDecodeError):
        raise CommandRefused("base64 of a text in UTF-8", "something else", key) from None


def _topic(finding: Finding) -> str:
    return "calibration" if "calibrat" in finding.what.lower() else ""


def _checked(checked: Preflight) -> dict[str, Any]:
    return {"findings": [f.text for f in checked.findings], "passed": checked.passed,
            "reasons": [f.text for f in checked.reasons], "hashes": dict(checked.hashes)}
