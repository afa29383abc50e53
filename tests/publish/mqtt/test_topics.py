"""The table of topics: its schemas are sound, and the command prints them."""

import json
from dataclasses import asdict

import jsonschema
import pytest

from hvhost.cli.schema import run
from hvhost.publish.mqtt.topics import COMMANDS, STATES, TOPICS, Topic, mqtt_schema
from hvhost.publish.snapshot import Permission, Phase


@pytest.mark.parametrize("topic", TOPICS, ids=lambda topic: topic.name)
def test_a_schema_is_sound_and_closed(topic: Topic) -> None:
    """Each topic's schema is valid, names every key, and takes nothing else."""
    schema = topic.schema()
    jsonschema.Draft202012Validator.check_schema(schema)
    assert schema["additionalProperties"] is False
    assert set(schema["required"]) <= set(schema["properties"])
    assert not jsonschema.Draft202012Validator(schema).is_valid({})


@pytest.mark.parametrize("topic", TOPICS, ids=lambda topic: topic.name)
def test_a_payload_is_flat_and_its_numbers_bear_units(topic: Topic) -> None:
    """No value is an object or a list; a number says its unit in the key, or is a count, a time or an order."""
    plain = {"t", "seq", "pairs", "pairs_unseen", "step", "step_total", "polarity", "counter", "expires",
             "events_lost", "commands_refused"}
    for key, schema in topic.schema()["properties"].items():
        assert schema.get("type") not in ("object", "array")
        if schema.get("type") in ("number", "integer") or key == "polarity":
            assert key in plain or key.rsplit("_", 1)[-1] in {"kV", "mA", "s"}, key


def test_topics_are_valid_names() -> None:
    """MQTT-3.3.2-2, -4.7.3-1, -4.7.3-3: no wildcard, at least one character, at most 65,535 bytes."""
    for topic in TOPICS:
        name = topic.of("r" * 63, "s" * 63)
        assert 1 <= len(name.encode()) <= 65_535
        assert not set(name) & set("+#\0")
    assert len({topic.name for topic in TOPICS}) == len(TOPICS)


def test_what_may_be_retained_and_what_must_expire() -> None:
    """Only state and description are retained; a command never is; whatever can grow stale expires."""
    table = {topic.name: topic for topic in TOPICS}
    assert {name for name, topic in table.items() if topic.retained} == {"state", "description"}
    assert {name for name, topic in table.items() if not topic.sent} == {f"command/{one}" for one in COMMANDS}
    assert table["event"].qos == 1
    assert all(table[name].expiry_s for name in ("state", "event", "answer", "command/cut"))


def test_every_state_of_the_bench_has_its_word() -> None:
    """Whatever the picture can say has a word in the schema, and none of them is 'off'."""
    assert {str(one) for one in Permission} | {str(one) for one in Phase} - {""} <= set(STATES)
    assert "off" not in STATES


def test_the_command_prints_the_table(capsys: pytest.CaptureFixture[str]) -> None:
    """``hvhost schema mqtt`` prints what the table says."""
    assert run(["mqtt"]) == 0
    printed = json.loads(capsys.readouterr().out)
    assert printed == json.loads(json.dumps(mqtt_schema()))
    assert printed["topics"]["state"]["retained"] is True
    assert set(printed["topics"]) == {topic.name for topic in TOPICS}
    assert asdict(TOPICS[0])["name"] == "state"
