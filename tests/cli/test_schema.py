"""``hvhost schema``: a JSON Schema of each kind of file."""

import json

import jsonschema
import pytest

from hvhost.cli import exits, schema


@pytest.mark.parametrize("kind", ["bench", "plan", "sheet", "result"])
def test_each_schema_is_one(kind: str, capsys: pytest.CaptureFixture[str]) -> None:
    """What is printed for a file is JSON and a valid schema of its draft."""
    assert schema.run([kind]) == exits.PASSED
    printed = json.loads(capsys.readouterr().out)
    jsonschema.validators.validator_for(printed).check_schema(printed)
