"""``result.json``: versioned, described by the schema that is published, corrected by revisions."""

import json
from pathlib import Path
from typing import Any

import jsonschema
import pytest

from hvhost.measure.result import evaluate
from hvhost.record.amend import amend, inspect_breakdown
from hvhost.record.data import load_run
from hvhost.record.folder import RunFolder
from hvhost.record.manifest import revisions_of
from hvhost.report.closing import close_run, page_of
from hvhost.report.resultfile import FORMAT, corrected_document, result_document, result_schema
from tests.record.making import Case, made_run

# what version 1 has promised: path -> type; entries are added when fields are, and never changed or taken away
VERSION_1 = Path(__file__).with_name("result_version_1.json")
CASES = {"held": Case(hold_s=1.0), "broke": Case(break_at_s=0.8), "gap": Case(hold_s=3.0, lose=40),
         "open": Case(hold_s=0.2, end=False), "nothing": Case(hold_s=0.0, level_v=100.0)}


def paths(schema: dict[str, Any], node: dict[str, Any], at: str = "") -> dict[str, str]:
    """Every field of a schema by its path, with its type."""
    if "$ref" in node:
        return paths(schema, schema["$defs"][node["$ref"].rpartition("/")[2]], at)
    if "anyOf" in node:
        found: dict[str, str] = {}
        for one in node["anyOf"]:
            found |= paths(schema, one, at + ("?" if one.get("type") == "null" else ""))
        return found
    if node.get("type") == "array":
        return paths(schema, node["items"], at + "[]")
    if "properties" in node:
        found = {}
        for name, one in node["properties"].items():
            found |= paths(schema, one, f"{at}.{name}")
        return found
    return {at: json.dumps(node.get("type") or node.get("enum") or node.get("const"))}


@pytest.mark.parametrize("case", CASES.values(), ids=CASES)
def test_every_result_fits_the_published_schema(tmp_path: Path, case: Case) -> None:
    """Whatever became of a run, its result has the fields that ``hvhost schema result`` prints, and no other."""
    run = load_run(made_run(tmp_path, case))
    document = json.loads(json.dumps(result_document(run.meta, evaluate(run)), allow_nan=False))
    schema = result_schema()
    jsonschema.Draft202012Validator.check_schema(schema)
    jsonschema.validate(document, schema)
    assert set(document) == set(schema["properties"])
    assert document["format"] == FORMAT == 1


def test_version_1_keeps_every_field_that_it_ever_had() -> None:
    """A field that goes or changes its type needs a new version; one that is added is added to the promise too."""
    schema = result_schema()
    now, promised = paths(schema, schema), json.loads(VERSION_1.read_text())
    assert {path: now.get(path) for path in promised} == promised, "a promised field is gone or changed: raise FORMAT"
    assert set(now) == set(promised), "add the new fields to the promise"


def test_a_wrong_document_does_not_fit() -> None:
    """The schema refuses another version, a missing field and a text for a number."""
    schema = result_schema()
    for document in ({}, {"format": 2}):
        with pytest.raises(jsonschema.ValidationError):
            jsonschema.validate(document, schema)


def closed(root: Path) -> RunFolder:
    """A closed run with a breakdown."""
    folder = made_run(root, Case(break_at_s=0.8))
    close_run(folder)
    return folder


def test_corrections_and_kinds_show_in_the_document_and_on_the_page(tmp_path: Path) -> None:
    """The closed file stays; what is shown and handed over is as it was corrected, and says by which revision."""
    folder = closed(tmp_path)
    sealed = json.loads((folder.path / "result.json").read_text())
    assert (sealed["specimen"], sealed["revision"], sealed["breakdowns"][0]["kind"]) == ("S-1", 0, "kind not inspected")
    index = sealed["breakdowns"][0]["index"]
    amend(folder, {"specimen": "S-9", "operator": "operator Z"}, reason="label misread", by="operator A", utc_ns=1)
    inspect_breakdown(folder, 1, index, "flashover", by="operator B", utc_ns=2)
    revisions = revisions_of(folder)
    run = load_run(folder)
    fresh = result_document(run.meta, evaluate(run), revisions)
    assert fresh == corrected_document(sealed, revisions)
    assert (fresh["specimen"], fresh["operator"], fresh["revision"]) == ("S-9", "operator Z", 2)
    assert fresh["breakdowns"][0]["kind"] == "flashover (seen by operator B)"
    jsonschema.validate(fresh, result_schema())
    page = page_of(folder)
    assert "S-9 (corrected, revision 1)" in page
    assert "specimen: 'S-1' corrected to 'S-9'" in " ".join(page.split())
    assert "flashover (seen by operator B)" in " ".join(page.split())
    assert "kind not inspected" not in " ".join(page.split())
    assert "manifest and files agree" in page
    assert json.loads((folder.path / "result.json").read_text()) == sealed
