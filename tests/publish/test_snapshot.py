"""The snapshot: frozen, plain in JSON, strict on the way back."""

import json
import math
from dataclasses import FrozenInstanceError, fields, is_dataclass, replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.publish import snapshot as module
from hvhost.publish.snapshot import EventLine, Permission, Reading, Snapshot, TrendBucket, VoltageState
from hvhost.supervisor import states
from hvhost.words.errors import WireFault
from tests.pictures.states import IDLE, STATES

JUNK = st.recursive(st.none() | st.booleans() | st.integers() | st.floats() | st.text(max_size=5),
                    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.text(max_size=5), inner, max_size=3))


@pytest.mark.parametrize("state", STATES)
def test_every_state_survives_the_way_through_json(state: str) -> None:
    """What to_json gives is taken by a strict encoder and comes back equal."""
    snapshot, _ = STATES[state]
    text = json.dumps(snapshot.to_json(), allow_nan=False)
    assert Snapshot.from_json(json.loads(text)) == snapshot


def test_a_snapshot_cannot_be_changed() -> None:
    """An outlet that keeps a snapshot keeps what was true then."""
    with pytest.raises(FrozenInstanceError):
        IDLE.seq = 4  # type: ignore[misc]


def test_every_view_is_frozen_and_slotted() -> None:
    """No part of a snapshot takes a new attribute."""
    kinds = [kind for kind in vars(module).values() if isinstance(kind, type) and is_dataclass(kind)]
    assert len(kinds) >= 10
    assert all(kind.__dataclass_params__.frozen and "__slots__" in vars(kind) for kind in kinds)


@pytest.mark.parametrize("bad", [math.nan, math.inf, -math.inf])
def test_a_number_that_is_none_becomes_none(bad: float) -> None:
    """JSON knows no NaN, and an outlet must not invent a number for it."""
    snapshot = replace(IDLE, reading=Reading(volts=bad, amps=1.0, age_s=0.1), set_volts=bad)
    plain = snapshot.to_json()
    assert plain["set_volts"] is None
    assert plain["reading"]["volts"] is None
    assert Snapshot.from_json(plain).reading == Reading(volts=None, amps=1.0, age_s=0.1)


def test_unknown_fields_are_skipped() -> None:
    """A screen goes on with a daemon that says more than it knows."""
    assert Snapshot.from_json({**IDLE.to_json(), "weather": "rain"}) == IDLE


@pytest.mark.parametrize(("field", "value", "place"), [
    ("seq", "7", "snapshot.seq"), ("seq", True, "snapshot.seq"), ("rehearsal", 1, "snapshot.rehearsal"),
    ("link", "fine", "snapshot.link"), ("reading", [], "snapshot.reading"), ("trend", [[1, 2]], "snapshot.trend[0]"),
    ("events", [{"text": "no time"}], "snapshot.events[0]"), ("latched", "breakdown", "snapshot.latched"),
    ("volts_full", "25 kV", "snapshot.volts_full"),
])
def test_a_wrong_kind_is_refused_with_its_place(field: str, value: object, place: str) -> None:
    """A field of the wrong kind is a fault at that field, not a crash later on."""
    with pytest.raises(WireFault) as caught:
        Snapshot.from_json({**IDLE.to_json(), field: value})
    assert caught.value.where.startswith(place)


@given(JUNK)
def test_anything_else_is_a_wire_fault(data: object) -> None:
    """Any value at all either is a snapshot or is refused by name."""
    with pytest.raises(WireFault):
        Snapshot.from_json(data)


@given(st.sampled_from([field.name for field in fields(Snapshot)]), JUNK)
def test_any_junk_in_any_field_is_taken_or_refused(name: str, junk: object) -> None:
    """No content of any field raises anything but a wire fault."""
    places = []
    try:
        Snapshot.from_json({**IDLE.to_json(), name: junk})
    except WireFault as fault:
        places.append(fault.where)
    assert all(name in place for place in places)


def test_the_words_are_the_supervisors() -> None:
    """A permission, a phase, a link or a voltage of the supervisor is one that a snapshot can show."""
    shown = set(map(str, Permission)) | set(map(str, module.Phase))
    assert {str(one) for one in states.Permission} <= shown
    assert {str(one) for one in states.LinkState} <= set(map(str, module.LinkState))
    assert {str(one) for one in states.Voltage} <= set(map(str, VoltageState))


def test_defaults_claim_nothing() -> None:
    """A snapshot that was told nothing says unknown and no link, never off."""
    bare = Snapshot(utc_ns=0, now_s=0.0, seq=0, bench="x")
    assert (bare.link, bare.voltage, bare.reading, bare.power_words) == ("none", "unknown", None, "")


def test_event_and_bucket_are_plain_in_json() -> None:
    """Buckets are short lists, since there are many; events are objects."""
    snapshot = replace(IDLE, events=(EventLine(utc_ns=5, text="a"),), trend=(TrendBucket(1.0, 2.0, 3.0, 4.0, 5.0),))
    plain = snapshot.to_json()
    assert plain["trend"] == [[1.0, 2.0, 3.0, 4.0, 5.0]]
    assert plain["events"] == [{"utc_ns": 5, "text": "a", "severity": "note", "number": 0}]
