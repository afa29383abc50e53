"""META and notes."""

import json
from dataclasses import dataclass
from enum import StrEnum

import pytest

from hvhost.record.meta import RunMeta, jsonable, note, step_note
from hvhost.words.errors import RecordFault
from tests.record.making import made_meta


def test_meta_comes_back_equal_through_json() -> None:
    """What is written before a run is read back as the same value."""
    meta = made_meta(reasons=({"what": "x"},))
    assert RunMeta.of(json.loads(json.dumps(meta.to_json()))) == meta


@pytest.mark.parametrize(("change", "said"), [({"format": 2}, "format 1"), ({"voltage": {}}, "every key"),
                                              ({"run": None}, None)])
def test_a_meta_of_another_form_is_refused(change: dict[str, object], said: str | None) -> None:
    """A newer format or a missing key is a sentence."""
    data = {**made_meta().to_json(), **change}
    if said is None:
        del data["run"]
    with pytest.raises(RecordFault, match=said or "every key"):
        RunMeta.of(data)


class Colour(StrEnum):
    """A closed set."""

    RED = "red"


@dataclass(frozen=True, slots=True)
class Thing:
    """A dataclass."""

    colour: Colour
    parts: frozenset[str]


def test_dataclasses_say_their_type_and_sets_are_sorted() -> None:
    """The program's steps can be told apart in JSON, and equal values give equal text."""
    assert jsonable({Colour.RED: (Thing(Colour.RED, frozenset("ba")),)}) == {
        "red": [{"type": "Thing", "colour": "red", "parts": ["a", "b"]}]}


def test_a_step_note_has_a_phase_of_the_table() -> None:
    """A misspelt phase is refused where it is written, not where it is read."""
    entry = step_note(1.0, 2, number=1, name="ramp", phase="begin", index=3, tick=30)
    assert entry.data["phase"] == "begin"
    assert note("comment", 1.0, 2, text="x").data == {"what": "comment", "t_mono": 1.0, "utc_ns": 2, "text": "x"}
    with pytest.raises(RecordFault, match="begin or clock start"):
        step_note(1.0, 2, number=1, name="ramp", phase="started", index=3, tick=30)
