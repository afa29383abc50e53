"""Later corrections of a run sheet, and the kind of a breakdown as whoever looked found it: chained revisions.

Nothing of a closed run is ever changed.  A correction says which field held what, what it holds now, why, and who says
so; readers apply the corrections in order.  The fields are few and closed: what a verdict was judged by (values of the
plan's parameters, windows that prove the specimen) cannot be corrected, only run again.  FORMAT.md, section 8.
"""

import fcntl
import json
import os
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, replace
from enum import StrEnum
from pathlib import Path
from typing import Any

from hvhost.plan.plan import RunSheet
from hvhost.plan.sheet import read_sheet
from hvhost.record.entries import Json
from hvhost.record.folder import RunFolder
from hvhost.record.manifest import append_revision, revisions_of
from hvhost.record.meta import RunMeta
from hvhost.words.errors import CommandRefused
from hvhost.words.findings import refused
from hvhost.words.nearest import nearest_word

AMENDMENT, INSPECTION = "amendment", "inspection"  # kinds of revision
REASON_MAX, NAME_MAX = 1_000, 200  # characters


class BreakdownKind(StrEnum):
    """What a disruptive discharge was, seen by whoever looked: V and I cannot tell them apart."""

    PUNCTURE = "puncture"  # through the solid or liquid
    FLASHOVER = "flashover"  # along a surface
    SPARKOVER = "sparkover"  # through a gap in gas or liquid


@dataclass(frozen=True, slots=True, kw_only=True)
class Field:
    """A field that may be corrected: where it stands in a run sheet's text, and its value in a sheet that was read."""

    path: tuple[str, ...]
    value: Callable[[RunSheet], str | float | None]


# key on the command line and in the revision -> the field; in META's sheet the last name of META_KEYS
FIELDS: dict[str, Field] = {
    "specimen": Field(path=("specimen",), value=lambda s: s.specimen),
    "order": Field(path=("order",), value=lambda s: s.order),
    "operator": Field(path=("operator",), value=lambda s: s.operator),
    "second_person": Field(path=("second_person",), value=lambda s: s.second_person),
    "environment.temperature_c": Field(path=("environment", "temperature"),
                                       value=lambda s: s.environment.temperature_c),
    "environment.humidity": Field(path=("environment", "humidity"), value=lambda s: s.environment.humidity),
    "environment.pressure_pa": Field(path=("environment", "pressure"), value=lambda s: s.environment.pressure_pa),
}
SPELLINGS = {".".join(field.path): key for key, field in FIELDS.items()}


def amend(folder: RunFolder, changes: Mapping[str, str], *, reason: str, by: str, utc_ns: int) -> Path:
    """Correct fields of a closed run's sheet; ``changes`` maps keys as in a run sheet to texts as typed there.

    Raises `CommandRefused` where the run is not closed, a key is unknown, a value could not stand in a run sheet,
    nothing would change, or reason or name are missing; nothing is done then.
    """
    reason, by = _said(reason, "a reason", REASON_MAX), _said(by, "a name", NAME_MAX)
    if not changes:
        raise CommandRefused("at least one field", "none", "amend", f"one of {', '.join(SPELLINGS)}")
    parsed = {_key(name): _value(name, text) for name, text in changes.items()}
    with alone(folder):
        sheet = amended_sheet(_sheet_of(folder), revisions_of(folder))
        fields = {key: {"from": _in(sheet, key), "to": value} for key, value in parsed.items()}
        same = [key for key, change in fields.items() if change["from"] == change["to"]]
        if same:
            raise CommandRefused("a value that differs", f"{parsed[same[0]]!r} already", same[0])
        data = {AMENDMENT: _count(folder, AMENDMENT) + 1, "fields": fields, "reason": reason, "by": by}
        return append_revision(folder, AMENDMENT, data, utc_ns=utc_ns)


def inspect_breakdown(folder: RunFolder, number: int, index: int, kind: str, *, by: str, remark: str = "",
                      utc_ns: int) -> Path:
    """Enter what a closed run's breakdown ``number`` (from 1; at sample ``index``) was; raises `CommandRefused`."""
    by = _said(by, "a name", NAME_MAX)
    remark = _said(remark, "a remark", REASON_MAX) if remark else ""
    if kind not in set(BreakdownKind):
        near = nearest_word(kind, [str(one) for one in BreakdownKind])
        raise CommandRefused(" or ".join(BreakdownKind), repr(kind)[:60], "kind",
                             f"did you mean '{near}'?" if near else "enter what was seen, not what is likely")
    with alone(folder):
        known = kinds_of(revisions_of(folder)).get(index)
        if known is not None and known.kind == kind:
            raise CommandRefused("another kind", f"{kind} already, by {known.by}", f"breakdown {number}")
        data = {INSPECTION: _count(folder, INSPECTION) + 1, "breakdown": number, "index": index, "kind": kind,
                "remark": remark, "by": by}
        return append_revision(folder, INSPECTION, data, utc_ns=utc_ns)


# ---------------------------------------------------------------- reading them back


@dataclass(frozen=True, slots=True, kw_only=True)
class Inspected:
    """The kind of one breakdown, who saw it, and the revision that says so."""

    kind: str
    by: str
    revision: int


def kinds_of(revisions: tuple[Json, ...]) -> dict[int, Inspected]:
    """Return the kinds entered, by the breakdown's sample index; the last one counts."""
    found: dict[int, Inspected] = {}
    for revision, data in _of(revisions, INSPECTION):
        if isinstance(data.get("index"), int) and data.get("kind") in set(BreakdownKind):
            found[data["index"]] = Inspected(kind=str(data["kind"]), by=str(data.get("by", "")), revision=revision)
    return found


def amended_sheet(sheet: Json, revisions: tuple[Json, ...]) -> dict[str, Any]:
    """Return a run sheet (as META holds it) as it stands after every correction; unknown fields are passed over."""
    out: dict[str, Any] = dict(sheet)
    for key, _, value in _changes(revisions):
        *outer, name = key.split(".")
        if outer:
            out[outer[0]] = {**(out.get(outer[0]) or {}), name: value}
        else:
            out[name] = value
    return out


def amended_keys(revisions: tuple[Json, ...]) -> dict[str, int]:
    """Return each corrected field with the number of the revision that corrected it last."""
    return {key: revision for key, revision, _ in _changes(revisions)}


def amended_meta(meta: RunMeta, revisions: tuple[Json, ...]) -> RunMeta:
    """Return a run's META with its sheet, and the operator, as they stand after every correction."""
    keys = amended_keys(revisions)
    if not keys:
        return meta
    sheet = amended_sheet(meta.sheet or {}, revisions)
    return replace(meta, sheet=sheet, operator=str(sheet["operator"]) if "operator" in keys else meta.operator)


def revision_text(revision: Json) -> str:
    """Say what a correction or an inspection says, in one line; '' for a revision of another kind."""
    data = revision.get("data")
    if not isinstance(data, Mapping):
        return ""
    by = data.get("by", "")
    if revision.get("kind") == AMENDMENT and isinstance(data.get("fields"), Mapping):
        changes = "; ".join(f"{key}: {_shown(change.get('from'))} corrected to {_shown(change.get('to'))}"
                            for key, change in data["fields"].items() if isinstance(change, Mapping))
        return f"{changes} ({by}: {data.get('reason', '')})"
    if revision.get("kind") == INSPECTION:
        remark = f": {data['remark']}" if data.get("remark") else ""
        return f"breakdown {data.get('breakdown')}: {data.get('kind')}, seen by {by}{remark}"
    return ""


# ---------------------------------------------------------------- within


def _of(revisions: tuple[Json, ...], kind: str) -> Iterator[tuple[int, Json]]:
    for number, revision in enumerate(revisions, start=1):
        data = revision.get("data")
        if revision.get("kind") == kind and isinstance(data, Mapping):
            yield number, data


def _changes(revisions: tuple[Json, ...]) -> Iterator[tuple[str, int, Any]]:
    for number, data in _of(revisions, AMENDMENT):
        fields = data.get("fields")
        for key, change in fields.items() if isinstance(fields, Mapping) else ():
            if key in FIELDS and isinstance(change, Mapping) and "to" in change:
                yield key, number, change["to"]


def _in(sheet: Json, key: str) -> Any:
    value: Any = sheet
    for name in key.split("."):
        value = value.get(name) if isinstance(value, Mapping) else None
    return "" if value is None and key in ("order", "operator", "second_person") else value


def _count(folder: RunFolder, kind: str) -> int:
    return sum(1 for _ in _of(revisions_of(folder), kind))


def _sheet_of(folder: RunFolder) -> Json:
    try:
        meta = json.loads((folder.path / "meta.json").read_bytes())
        return {**(meta.get("sheet") or {}), "operator": meta.get("operator", "")}
    except (OSError, ValueError, AttributeError):
        raise CommandRefused("a run whose meta.json can be read", "none", str(folder.path)) from None


def _key(name: str) -> str:
    if name not in SPELLINGS:
        near = nearest_word(name, SPELLINGS)
        raise CommandRefused(f"one of {', '.join(SPELLINGS)}", repr(name)[:60], "amend",
                             f"did you mean '{near}'?" if near else "what a verdict was judged by cannot be corrected")
    return SPELLINGS[name]


def _value(name: str, text: str) -> str | float | None:
    """Read one value as a run sheet would; raises `CommandRefused` with what the sheet would say."""
    field = FIELDS[_key(name)]
    typed = json.dumps(text, ensure_ascii=False)
    for part in reversed(field.path[1:]):
        typed = f"{{{part}: {typed}}}"
    specimen = "" if field.path == ("specimen",) else "specimen: none\n"
    sheet, findings = read_sheet("value", f"sheet: correction\n{specimen}{field.path[0]}: {typed}\n")
    if sheet is None:
        fault = refused(findings)[0]
        raise CommandRefused(fault.expected, fault.found, name, fault.remedy)
    return field.value(sheet)


def _said(text: str, what: str, longest: int) -> str:
    text = text.strip()
    if not text or len(text) > longest or not text.isprintable():
        raise CommandRefused(f"{what} of at most {longest} printable characters", repr(text)[:60], "amend")
    return text


def _shown(value: object) -> str:
    return "nothing" if value in (None, "") else repr(value) if isinstance(value, str) else str(value)


@contextmanager
def alone(folder: RunFolder) -> Iterator[None]:
    """Hold the folder while a revision is made, so that two at once cannot take one number."""
    if not folder.closed:
        raise CommandRefused("a closed run", "one that is open", folder.name, "close it first: hvhost recover")
    descriptor = os.open(folder.path, os.O_RDONLY | os.O_DIRECTORY | os.O_CLOEXEC)
    try:
        try:
            fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            raise CommandRefused("a run that nobody else amends", "somebody does", folder.name, "try again") from None
        yield
    finally:
        os.close(descriptor)
