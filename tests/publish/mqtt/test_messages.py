"""From pictures to payloads: every state of the screen gives messages that fit their schemas and hide nothing."""

import json
import math
from dataclasses import replace
from typing import Any

import jsonschema
import pytest

from hvhost.publish.mqtt import topics
from hvhost.publish.mqtt.messages import (
    death_of,
    description_of,
    encode,
    number,
    state_of,
    state_word,
    telemetry_of,
    text,
)
from hvhost.publish.mqtt.telemetry import Interval
from hvhost.publish.snapshot import LinkState, Snapshot
from hvhost.publish.spans import SpanView
from tests.pictures.states import IDLE, STATES
from tests.publish.mqtt.scene import BROKER, SPAN, bench_with

SESSION = "0123456789abcdef-1"
STAMP = {"t": 1_764_594_202_350_000_000, "seq": 0, "session": SESSION}
INTERVAL = Interval(span_s=1.0, span=SPAN)
SNAPSHOTS = {name: shown if isinstance(shown, Snapshot) else shown[0] for name, shown in STATES.items()}


def fits(topic: topics.Topic, payload: dict[str, Any]) -> dict[str, Any]:
    """The payload as it arrives, after its schema has taken it."""
    arrived = json.loads(encode(payload))
    jsonschema.validate(arrived, topic.schema())
    assert isinstance(arrived, dict)
    return arrived


@pytest.mark.parametrize("name", SNAPSHOTS)
def test_every_picture_gives_messages_that_fit(name: str) -> None:
    """State and telemetry of every state that a screen can show fit their schemas and are flat."""
    snapshot = SNAPSHOTS[name]
    for topic, payload in ((topics.STATE, state_of(snapshot)), (topics.TELEMETRY, telemetry_of(snapshot, INTERVAL))):
        arrived = fits(topic, STAMP | payload)
        assert not [name for name, value in arrived.items() if isinstance(value, dict | list)], "flat"


def test_a_bench_without_a_fresh_reading_is_unknown() -> None:
    """S13: link lost or a reading older than the lease says 'unknown', whatever the permission was."""
    assert state_word(IDLE) == "idle"
    assert state_word(replace(IDLE, reading=None)) == "unknown"
    assert state_word(replace(IDLE, link=LinkState.LOST)) == "unknown"
    assert state_word(replace(IDLE, link=LinkState.NONE)) == "unknown"
    told = state_of(replace(IDLE, link=LinkState.LOST))
    assert (told["state"], told["voltage"], told["power"]) == ("unknown", "unknown", "")


def test_a_death_says_unknown_and_bears_its_session() -> None:
    """The Last Will never says 'off', and names the session that it ends."""
    death = fits(topics.STATE, death_of(SESSION, 5, 0, "the daemon is gone"))
    assert (death["state"], death["available"], death["session"]) == ("unknown", False, SESSION)
    assert "off" not in encode(death).decode()


def test_a_description_fits_and_names_the_limits() -> None:
    """What the bench is, with units in the keys and the polarity's sign."""
    bench = bench_with(BROKER)
    about = fits(topics.DESCRIPTION, STAMP | description_of(bench, "hvhost 0", 1.0, False))
    assert (about["voltage_highest_kV"], about["current_highest_mA"], about["polarity"]) == (24.0, 4.0, 1)


def test_telemetry_bears_the_sign_of_the_polarity() -> None:
    """On a negative bench the greatest magnitude is the least value, and least <= mean <= greatest."""
    told = telemetry_of(replace(IDLE, polarity=-1), INTERVAL)
    assert (told["voltage_min_kV"], told["voltage_mean_kV"], told["voltage_max_kV"]) == (-5.013, -5.0, -4.99)
    assert told["current_min_mA"] <= told["current_mean_mA"] <= told["current_max_mA"]


def test_what_is_not_known_is_left_out_and_quality_says_so() -> None:
    """No null and no NaN: an interval without samples has no values."""
    told = telemetry_of(replace(IDLE, reading=None), Interval(span_s=1.0, span=SpanView()))
    assert told == {"interval_s": 1.0, "pairs": 0, "state": "unknown", "quality": "none"}
    assert telemetry_of(IDLE, Interval(span_s=1.0, span=replace(SPAN, gap=True)))["quality"] == "gap"
    assert telemetry_of(IDLE, Interval(span_s=1.0, span=replace(SPAN, unseen=3)))["pairs_unseen"] == 3
    assert telemetry_of(IDLE, Interval(span_s=1.0, span=replace(SPAN, flagged=True)))["quality"] == "flagged"
    assert telemetry_of(IDLE, INTERVAL)["quality"] == "good"


@pytest.mark.parametrize("value", [math.nan, math.inf, -math.inf])
def test_no_payload_holds_what_is_no_number(value: float) -> None:
    """The encoder refuses it, and the builders leave it out before."""
    with pytest.raises(ValueError, match="JSON"):
        encode({"x": value})
    told = telemetry_of(IDLE, Interval(span_s=1.0, span=replace(SPAN, volts_max=value)))
    assert "voltage_max_kV" not in told


def test_numbers_are_short_and_texts_bounded() -> None:
    """Eight digits are finer than any converter; a text is cut where the schema ends, a lone surrogate replaced."""
    assert number(0.1 + 0.2) == 0.3
    assert json.loads(encode({"v": number(12345.678901234)})) == {"v": 12345.679}
    assert len(text("x" * 600)) == 500
    assert encode({"x": "\ud800"}) == b'{"x":"?"}'
