"""The run sheet: read from a file, or written from what was typed when a run was asked for.

A sheet alone knows no plan, so the texts under ``values`` are kept as typed; ``compiler.filled`` reads them in the
dimensions that the plan declares.
"""

import json
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from hvhost.plan.blocks import SheetBlock
from hvhost.plan.passing import text_hash
from hvhost.plan.plan import Confirmations, Environment, RunSheet, Window
from hvhost.plan.steps import Builder
from hvhost.words.errors import FileFault
from hvhost.words.findings import Finding, refused
from hvhost.words.modelpaths import Absent
from hvhost.words.sniff import other_kind
from hvhost.words.textfile import read_model, read_text

SIGNS = {"positive": 1, "negative": -1}
TYPED = "run sheet as typed"  # the name that findings show for a sheet without a file


def load_sheet(path: Path) -> RunSheet:
    """Return the run sheet of a file; raises FileFault with every finding where anything refuses."""
    return sheet_from(path.name, read_text(path), str(path))


def sheet_from(name: str, text: str, place: str = "") -> RunSheet:
    """The same from a text, as a record keeps it."""
    sheet, findings = read_sheet(name, text)
    if sheet is None:
        faults = refused(findings)
        raise FileFault("a run sheet without faults", f"{len(faults)} ({faults[0].text})", place or name,
                        "'hvhost check' lists them all", findings=findings)
    return sheet


def check_sheet(path: Path) -> tuple[Finding, ...]:
    """Return every finding of one run sheet, in the order of its lines; never raises for what the file holds."""
    try:
        return read_sheet(path.name, read_text(path))[1]
    except FileFault as unreadable:
        return tuple(f for f in unreadable.findings if isinstance(f, Finding))


def sheet_schema() -> dict[str, Any]:
    """Return the JSON Schema of a run sheet."""
    return SheetBlock.model_json_schema(by_alias=True)


def read_sheet(file: str, text: str) -> tuple[RunSheet | None, tuple[Finding, ...]]:
    """Return the sheet (None where anything refuses) and every finding, in the order of their lines."""
    if other := other_kind(file, text, "sheet"):
        return None, other
    reading = read_model(SheetBlock, file, text)
    build = Builder(file, reading.root)
    if reading.root.entries:
        _check(build, reading.partial)
    findings = tuple(sorted((*reading.findings, *build.findings), key=lambda f: f.line))
    if reading.model is None or refused(findings):
        return None, findings
    return _sheet(build, reading.model, text), findings


def sheet_of(specimen: str, *, operator: str = "", values: Mapping[str, str] | None = None, order: str = "",
             second_person: str = "", repeat_of: str = "", title: str = "typed with the run") -> RunSheet:
    """Return a sheet with what was typed; its text is written out so that it is hashed and kept like any other.

    Raises FileFault where what was typed could not stand in a file.
    """
    typed = {"sheet": title, "specimen": specimen, "order": order, "operator": operator,
             "second_person": second_person, "repeat_of": repeat_of}
    # JSON strings are YAML's double-quoted scalars: whatever was typed stays one text.
    lines = [f"{key}: {json.dumps(value, ensure_ascii=False)}" for key, value in typed.items()
             if value or key == "specimen"]
    if values:
        lines += ["values:", *(f"  {json.dumps(k, ensure_ascii=False)}: {json.dumps(v, ensure_ascii=False)}"
                               for k, v in values.items())]
    return sheet_from(TYPED, "\n".join(lines) + "\n")


def _check(build: Builder, block: Any) -> None:
    for name in ("capacitance", "current"):
        try:
            window = getattr(block.connected, name) if block.connected is not None else None
            if window is not None and window.high <= window.low:
                build.fault(("connected", name, "to"), "more than 'from'",
                            f"'{build.root.at(('connected', name, 'to')).text}'")
        except Absent:
            continue
    if build.root.has(("connected",)) and build.root.at(("connected",)).entries == {}:
        build.fault(("connected",), "'capacitance', 'current' or both", "nothing")
    try:
        if block.operator is not None and block.operator == block.second_person:
            build.fault(("second_person",), "another person than the operator", f"'{block.second_person}'")
    except Absent:
        return


def _sheet(build: Builder, block: SheetBlock, text: str) -> RunSheet:
    keys = ("specimen", "order", "operator", "second_person", "environment", "values", "connected", "confirmed",
            "repeat_of")
    lines = {key: build.root.line_of(key) for key in keys}
    lines |= {f"values.{name}": build.root.line_of("values", name) for name in block.values}
    lines |= {f"confirmed.{name}": build.root.line_of("confirmed", name) for name in Confirmations.__slots__}
    connected = block.connected
    return RunSheet(file=build.file, text=text, sha256=text_hash(text), title=block.sheet, specimen=block.specimen,
                    order=block.order or "", operator=block.operator or "", second_person=block.second_person or "",
                    specimen_data=dict(block.specimen_data), environment=_environment(block),
                    values=dict(block.values),
                    capacitance=_window(build, connected and connected.capacitance, "capacitance"),
                    current=_window(build, connected and connected.current, "current"), confirmed=_confirmed(block),
                    repeat_of=block.repeat_of or "", remarks=block.remarks or "", lines=lines)


def _window(build: Builder, block: Any, name: str) -> Window | None:
    if block is None:
        return None
    return Window(low=block.low, high=block.high, line=build.root.line_of("connected", name))


def _environment(block: SheetBlock) -> Environment:
    air = block.environment
    if air is None:
        return Environment()
    return Environment(temperature_c=air.temperature, humidity=air.humidity, pressure_pa=air.pressure)


def _confirmed(block: SheetBlock) -> Confirmations:
    said = block.confirmed
    if said is None:
        return Confirmations()
    return Confirmations(polarity=SIGNS[said.polarity] if said.polarity else None, ground_removed=said.ground_removed,
                         grounded_while_connecting=said.grounded_while_connecting, area_clear=said.area_clear)
