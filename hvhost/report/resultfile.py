"""``result.json``: what a run tells, with who and what it is of, in one versioned form with a published schema.

The form is generated from the measures' own types, so that schema and file cannot part.  Within one version fields may
be added and never taken away, renamed or given another meaning; a reader passes over what it does not know.  Units
stand in the names: ``_v`` V, ``_a`` A, ``_s`` s, ``_f`` and ``farads`` F, ``ohms`` Ω, ``siemens`` S, ``volts`` V,
``amps`` A, ``_utc_ns`` nanoseconds since 1970.  A value with uncertainty is ``value`` and ``u`` (standard, k = 1).
Volts and amps are magnitudes in the direction of ``polarity``; null stands for what is not known.
"""

import math
import types
import typing
from collections.abc import Mapping
from dataclasses import dataclass, fields, is_dataclass, replace
from enum import Enum
from functools import cache
from typing import Any

from hvhost.measure.breakdowns import NOT_INSPECTED
from hvhost.measure.result import Result
from hvhost.record.amend import amended_keys, amended_meta, amended_sheet, kinds_of
from hvhost.record.entries import Json
from hvhost.record.meta import RunMeta

FORMAT = 1
DIALECT = "https://json-schema.org/draft/2020-12/schema"


@dataclass(frozen=True, slots=True, kw_only=True)
class Identity:
    """Which run it is: of what, by whom, under which plan, on which bench."""

    format: int
    run: str
    tag: str  # 8 hexadecimal digits
    kind: str  # 'plan', 'direct', 'calibration', 'check', 'rehearsal'
    opened_utc_ns: int
    order: str
    specimen: str
    operator: str
    second_person: str
    plan: str
    plan_released_by: str
    bench: str
    polarity: int  # +1 or -1
    calibrated: str | None  # the certificate behind the scaling
    hashes: Json  # SHA-256 of plan, sheet, bench and calibration that were preflighted
    software: str
    revision: int  # revisions that this result takes into account


def corrected(meta: RunMeta, result: Result, revisions: tuple[Json, ...]) -> tuple[RunMeta, Result]:
    """Return META and result with every correction and every kind of breakdown that was entered later."""
    kinds = kinds_of(revisions)
    found = tuple(replace(b, kind=f"{kinds[b.index].kind} (seen by {kinds[b.index].by})") if b.index in kinds else b
                  for b in result.breakdowns)
    judgements = result.judgements
    if found and found[0] != result.breakdowns[0]:  # a judgement names the kind of the first one
        judgements = tuple(replace(j, text=j.text.replace(NOT_INSPECTED, found[0].kind)) for j in judgements)
    return amended_meta(meta, revisions), replace(result, breakdowns=found, judgements=judgements)


def identity_of(meta: RunMeta) -> Identity:
    """Return a run's identity from its META."""
    sheet, plan, bench = meta.sheet or {}, meta.plan or {}, meta.bench
    calibrated = bench.get("calibrated")
    return Identity(
        format=FORMAT, run=meta.run, tag=f"{meta.tag:08X}", kind=meta.kind, opened_utc_ns=meta.opened_utc_ns,
        order=str(sheet.get("order") or ""), specimen=str(sheet.get("specimen") or ""), operator=meta.operator,
        second_person=str(sheet.get("second_person") or ""), plan=str(plan.get("title") or plan.get("file") or ""),
        plan_released_by=str(plan.get("released_by") or ""), bench=str(bench.get("name") or bench.get("file") or ""),
        polarity=meta.polarity, calibrated=None if calibrated is None else str(calibrated), hashes=dict(meta.hashes),
        software=meta.software, revision=0)


def result_document(meta: RunMeta, result: Result, revisions: tuple[Json, ...] = ()) -> dict[str, Any]:
    """Return the content of ``result.json``, corrections included; strict JSON, not-finite numbers as null."""
    identity = identity_of(meta)
    document = {f.name: _plain(getattr(identity, f.name)) for f in fields(Identity)}
    return corrected_document({**document, **{k: _plain(v) for k, v in result.to_json().items()}}, revisions)


def corrected_document(document: Json, revisions: tuple[Json, ...]) -> dict[str, Any]:
    """Return a ``result.json`` as it was closed with every later correction and kind of breakdown."""
    keys, kinds = amended_keys(revisions), kinds_of(revisions)
    sheet = amended_sheet({}, revisions)
    out = {**document, **{key: sheet[key] for key in keys if key in document}}
    breakdowns = [b if not isinstance(b, Mapping) or b.get("index") not in kinds else
                  {**b, "kind": f"{kinds[b['index']].kind} (seen by {kinds[b['index']].by})"}
                  for b in document.get("breakdowns") or ()]
    out["breakdowns"] = breakdowns
    out["revision"] = max((*keys.values(), *(kind.revision for kind in kinds.values())), default=0)
    return out


def _plain(value: Any) -> Any:
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    if isinstance(value, Mapping):
        return {str(key): _plain(item) for key, item in value.items()}
    return [_plain(item) for item in value] if isinstance(value, list | tuple) else value


# ---------------------------------------------------------------- the schema


def result_schema() -> dict[str, Any]:
    """Return the JSON Schema (2020-12) of ``result.json``."""
    definitions: dict[str, Any] = {}
    identity, result = _object(Identity, definitions), _object(Result, definitions)
    identity["properties"]["format"] = {"const": FORMAT}
    return {"$schema": DIALECT, "title": "result.json of hvhost", "description": (__doc__ or "").split("\n\n")[1],
            "type": "object", "properties": {**identity["properties"], **result["properties"]},
            "required": list(dict.fromkeys((*identity["required"], *result["required"]))), "$defs": definitions}


@cache
def _hints(kind: type) -> dict[str, Any]:
    return typing.get_type_hints(kind)


def _object(kind: type, definitions: dict[str, Any]) -> dict[str, Any]:
    """Return the schema of one dataclass; every field is always written, so each is required."""
    hints = _hints(kind)
    names = [f.name for f in fields(kind)]
    return {"type": "object", "description": " ".join((kind.__doc__ or "").split()),
            "properties": {name: _schema(hints[name], definitions) for name in names}, "required": names}


def _schema(kind: Any, definitions: dict[str, Any]) -> dict[str, Any]:
    origin, arguments = typing.get_origin(kind), typing.get_args(kind)
    if origin in (types.UnionType, typing.Union):
        return {"anyOf": [_schema(one, definitions) for one in arguments]}
    if origin is tuple:
        return {"type": "array", "items": _schema(arguments[0], definitions)}
    if isinstance(kind, type) and issubclass(kind, Enum):
        return {"enum": [member.value for member in kind]}
    if is_dataclass(kind) and isinstance(kind, type):
        if kind.__name__ not in definitions:
            definitions[kind.__name__] = {}
            definitions[kind.__name__] = _object(kind, definitions)
        return {"$ref": f"#/$defs/{kind.__name__}"}
    words: dict[Any, Any] = {str: "string", int: "integer", bool: "boolean", float: ["number", "null"],
                             types.NoneType: "null"}
    return {"type": words[kind]} if kind in words else {"type": "object"}
