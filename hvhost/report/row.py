"""One row of a closed run for a laboratory's own files, made from ``result.json`` as it stands after corrections.

Keyed by order and specimen ID; ``run`` and ``revision`` tell repeats and corrections apart.  The columns are those of
version 1: more may follow at the end, none is taken away or moved.  Units stand in the names, values have the output's
sign, an empty cell is 'not known'.  A text that a spreadsheet would take for a formula gets an apostrophe before it.
"""

import csv
import io
import re
from collections.abc import Callable, Mapping
from typing import Any

from hvhost.record.csvform import CsvForm, time_text, zone_of
from hvhost.record.entries import Json

NAME_PART_MAX = 64  # characters of order or specimen in a file's name
FORMULA = ("=", "+", "-", "@")


def results_csv(document: Json, form: CsvForm) -> bytes:
    """Return header and row of one run as UTF-8."""
    text = io.StringIO()
    writer = csv.writer(text, delimiter=form.separator, lineterminator="\n")
    writer.writerow(COLUMNS)
    writer.writerow([_cell(read(document), form) for read in COLUMNS.values()])
    return text.getvalue().encode("utf-8")


def file_name(document: Json, folder: str) -> str:
    """Return '<order>_<specimen>_<run folder>.csv' with nothing but letters, digits, '.' and '-' in its parts."""
    parts = [_safe(str(document.get(key) or "")) or f"no-{key}" for key in ("order", "specimen")]
    return "_".join((*parts, folder)) + ".csv"


def _safe(text: str) -> str:
    return re.sub(r"[^A-Za-z0-9.-]+", "-", text)[:NAME_PART_MAX].strip(".-")


def _cell(value: Any, form: CsvForm) -> str:
    if value is None:
        return ""
    if isinstance(value, Time):
        return time_text(value.utc_ns, zone_of(form.zone))
    if isinstance(value, float):
        return f"{value:.9g}".replace(".", form.decimal)
    text = str(value)
    return "'" + text if isinstance(value, str) and text.startswith(FORMULA) else text


class Time:
    """A moment, written in the zone of the file."""

    __slots__ = ("utc_ns",)

    def __init__(self, utc_ns: int) -> None:
        self.utc_ns = utc_ns


Reader = Callable[[Json], Any]


def _of(key: str) -> Reader:
    return lambda d: d.get(key)


def _number(document: Json, path: tuple[str, ...], factor: float, *, signed: bool = False) -> float | None:
    value: Any = document
    for key in path:
        value = value.get(key) if isinstance(value, Mapping) else None
    if not isinstance(value, int | float) or isinstance(value, bool):
        return None
    sign = document.get("polarity", 1) if signed else 1
    return float(value) * factor * (-1.0 if sign == -1 else 1.0)


def _listed(key: str, at: int, path: tuple[str, ...], factor: float, *, signed: bool = False) -> Reader:
    """Read a number of the first (0) or last (-1) item of a list."""
    def read(document: Json) -> float | None:
        items = document.get(key)
        if not isinstance(items, list) or not items or not isinstance(items[at], Mapping):
            return None
        return _number({**items[at], "polarity": document.get("polarity")}, path, factor, signed=signed)
    return read


def _expanded(reader: Reader) -> Reader:
    """U from u: k = 2."""
    def read(document: Json) -> float | None:
        u = reader(document)
        return None if u is None else 2.0 * u
    return read


def _kind(document: Json) -> str | None:
    items = document.get("breakdowns")
    first = items[0] if isinstance(items, list) and items else None
    return str(first.get("kind", "")) if isinstance(first, Mapping) else None


COLUMNS: dict[str, Reader] = {
    "order": _of("order"), "specimen": _of("specimen"), "run": _of("run"), "revision": _of("revision"),
    "opened": lambda d: Time(int(d.get("opened_utc_ns", 0))), "kind": _of("kind"), "bench": _of("bench"),
    "plan": _of("plan"), "plan_released_by": _of("plan_released_by"), "operator": _of("operator"),
    "second_person": _of("second_person"), "verdict": _of("verdict"), "outcome": _of("outcome"), "why": _of("why"),
    "causes": lambda d: ", ".join(map(str, d.get("causes") or ())),
    "highest_kV": lambda d: _number(d, ("highest_v",), 1e-3, signed=True),
    "time_on_s": lambda d: _number(d, ("time_on_s",), 1.0),
    "hold_kV": _listed("holds", -1, ("mean", "value"), 1e-3, signed=True),
    "hold_U_kV": _expanded(_listed("holds", -1, ("mean", "u"), 1e-3)),
    "hold_s": _listed("holds", -1, ("inside_s",), 1.0),
    "leakage_uA": _listed("readings", -1, ("amps", "value"), 1e6, signed=True),
    "leakage_U_uA": _expanded(_listed("readings", -1, ("amps", "u"), 1e6)),
    "leakage_at_s": _listed("readings", -1, ("at_s",), 1.0),
    "breakdowns": lambda d: len(d.get("breakdowns") or ()),
    "breakdown_kV": _listed("breakdowns", 0, ("volts", "value"), 1e-3, signed=True),
    "breakdown_U_kV": _expanded(_listed("breakdowns", 0, ("volts", "u"), 1e-3)),
    "breakdown_kind": _kind, "samples": _of("pairs"), "samples_missing": _of("missing"),
}
