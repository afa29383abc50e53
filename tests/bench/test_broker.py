"""The section ``mqtt:`` of a bench file: off unless named, secrets elsewhere, nothing secret in the clear."""

import pytest

from hvhost.bench.broker import MqttVersion, level_of
from hvhost.bench.file import bench_from, check_text
from hvhost.words.findings import Finding
from tests.bench.changes import DEMO, NOTE, REFUSE

HERE = "host=127.0.0.1"
THERE = "host=broker.example"


def changed(*keys: str) -> str:
    """The demo bench with the section at its end."""
    return DEMO + "mqtt:\n" + "".join(f"  {key.replace('=', ': ', 1)}\n" for key in keys)


def findings(*keys: str) -> tuple[Finding, ...]:
    """What checking it says."""
    return check_text("b.yaml", changed(*keys))


def test_no_broker_unless_the_file_names_one() -> None:
    """Without the section nothing is published."""
    assert bench_from("demo.bench.yaml", DEMO).broker is None


def test_a_broker_needs_a_host_and_defaults_are_safe() -> None:
    """TLS, its registered port, no commands, an id of root and station; names become one topic level each."""
    broker = bench_from("b.yaml", changed(THERE)).broker
    assert broker is not None
    assert (broker.tls, broker.port, broker.commands, broker.version) == (True, 8883, False, MqttVersion.V5)
    assert (broker.root, broker.station, broker.client) == ("hvhost", "demo", "hvhost-demo")
    plain = bench_from("b.yaml", changed(HERE, "tls=no", "version=3.1.1", "station=bench-2",
                                         "telemetry=200 ms")).broker
    assert plain is not None
    assert (plain.port, plain.version, plain.telemetry_s) == (1883, MqttVersion.V311, 0.2)
    assert plain.client == "hvhost-bench-2"
    assert level_of("Bench.No 2/+#") == "bench-no-2---"
    (lacking,) = findings("port=1883")
    assert lacking.what == "mqtt.host"


@pytest.mark.parametrize(("fine", "faulty", "grade", "key"), [
    ((THERE, "certificate=/c", "key=/k"), (THERE, "certificate=/c"), REFUSE, "mqtt.certificate"),
    ((THERE, "certificate=/c", "key=/k"), (THERE, "key=/k"), REFUSE, "mqtt.key"),
    ((THERE, "ca=/c"), (HERE, "tls=no", "ca=/c"), REFUSE, "mqtt.ca"),
    ((THERE, "user=u", "password_file=/p"), (THERE, "password_file=/p"), REFUSE, "mqtt.password_file"),
    ((THERE, "user=u", "password_file=/p"), (THERE, "user=u", "tls=no", "password_file=/p"),
     REFUSE, "mqtt.password_file"),
    ((THERE, "user=u", "password_environment=P"),
     (THERE, "user=u", "password_environment=P", "password_file=/p"), REFUSE,
     "mqtt.password_environment"),
    ((HERE, "commands=yes", "tls=no"), (THERE, "commands=yes", "tls=no"), REFUSE, "mqtt.commands"),
    ((HERE, "tls=no"), (THERE, "tls=no"), NOTE, "mqtt.tls"),
])
def test_both_sides_of_each_rule(fine: tuple[str, ...], faulty: tuple[str, ...], grade: object, key: str) -> None:
    """Silent on one side; on the other exactly the named key."""
    assert [f.text for f in findings(*fine)] == []
    (told,) = findings(*faulty)
    assert (told.grade, told.what) == (grade, key)
    assert changed(*faulty).split("\n")[told.line - 1].strip().startswith(f"{key.removeprefix('mqtt.')}:")


@pytest.mark.parametrize(("change", "words"), [
    ("root=Lab/1", "a topic level"), ("station=+", "a topic level"), ("port=0", "from 1 to 65535"),
    ("version=4", "5 or 3.1.1"), ("telemetry=10 ms", "at least 100 ms"), ("client=a b", "a client id"),
    ("ca=ca.pem", "an absolute path"), ("password_environment=pass", "capital letters"),
    ("password=secret", ""), ("queue_events=5", "from 1000"), ("keep_alive=0 s", "at least 1 s")])
def test_a_wrong_value_is_refused_at_its_line(change: str, words: str) -> None:
    """Each key's form; a password in the file itself is an unknown key and is not repeated."""
    told = findings(THERE, change)
    assert [f.grade for f in told] == [REFUSE]
    assert words in told[0].expected
    assert told[0].what == "mqtt." + change.partition("=")[0]
    assert told[0].line > 0
