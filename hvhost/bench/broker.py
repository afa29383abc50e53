"""The section ``mqtt:`` of a bench file: the broker that the bench publishes to.  Without it nothing is published.

Secrets never stand in the file: it names where they lie.  Paths are absolute, since a daemon's folder is not the
file's.
"""

from collections.abc import Iterator
from dataclasses import dataclass
from enum import StrEnum
from typing import TYPE_CHECKING, Annotated

from pydantic import WithJsonSchema

from hvhost.bench.saying import NOTE, REFUSE, Say
from hvhost.words.fields import Block, YesNo, matching, quantity, schema_of, whole, word_of
from hvhost.words.findings import Finding
from hvhost.words.quantities import Dimension

if TYPE_CHECKING:
    from hvhost.bench.document import BenchFile

TLS_PORT, PLAIN_PORT = 8883, 1883  # registered for secure-mqtt and mqtt
LOOPBACK = frozenset({"localhost", "127.0.0.1", "::1"})


class MqttVersion(StrEnum):
    """The protocol's edition; MQTT 5 unless the broker knows only the older one."""

    V5 = "5"
    V311 = "3.1.1"


def _seconds(low: float, high: float) -> tuple[object, object]:
    return quantity(Dimension.SECOND, low=low, high=high), schema_of(Dimension.SECOND)


FilePath = Annotated[str, *matching(r"/[!-~]{1,199}", "an absolute path without blanks, such as '/etc/hvhost/ca.pem'")]
LevelName = Annotated[str, *matching(r"[a-z0-9][a-z0-9_-]{0,62}",
                                     "a topic level of small letters, digits, '_' and '-', at most 63 characters", 63)]


class MqttBlock(Block):
    """Broker, identity, rates, and whether `lower` and `cut` are taken from it."""

    host: Annotated[str, *matching(r"[A-Za-z0-9.:-]{1,150}", "a host name or address such as 'broker.example'")]
    port: Annotated[int, *whole(1, 65_535)] | None = None
    version: Annotated[MqttVersion, word_of(MqttVersion)[0],
                       WithJsonSchema({"enum": ["5", 5, "3.1.1"]})] = MqttVersion.V5  # an editor reads 5 as a number
    root: LevelName = "hvhost"
    station: LevelName | None = None
    client: Annotated[str, *matching(r"[A-Za-z0-9_-]{1,64}", "a client id of letters, digits, '_' and '-', "
                                     "at most 64 characters", 64)] | None = None
    tls: YesNo = True
    ca: FilePath | None = None
    certificate: FilePath | None = None
    key: FilePath | None = None
    user: Annotated[str, *matching(r"[!-~]{1,128}", "a user name without blanks")] | None = None
    password_file: FilePath | None = None
    password_environment: Annotated[str, *matching(r"[A-Z_][A-Z0-9_]{0,63}", "the name of an environment variable "
                                                   "in capital letters", 64)] | None = None
    telemetry: Annotated[float, *_seconds(0.1, 3600.0)] = 1.0
    keep_alive: Annotated[float, *_seconds(1.0, 600.0)] = 5.0
    commands: YesNo = False
    queue_folder: FilePath | None = None
    queue_events: Annotated[int, *whole(1_000, 1_000_000)] = 200_000


@dataclass(frozen=True, slots=True, kw_only=True)
class Broker:
    """Where and how the bench publishes; ``queue_folder`` and paths empty where the file names none.

    ``telemetry_s`` is the interval that one telemetry message covers; ``queue_events`` the most that the queue on
    disk keeps.
    """

    host: str
    port: int
    version: MqttVersion
    root: str
    station: str
    client: str
    tls: bool
    ca: str
    certificate: str
    key: str
    user: str
    password_file: str
    password_environment: str
    telemetry_s: float
    keep_alive_s: float
    commands: bool
    queue_folder: str
    queue_events: int


def level_of(name: str) -> str:
    """A bench's name as one topic level: small letters, and '-' for what a level may not hold."""
    return "".join(c if c.isalnum() or c in "_-" else "-" for c in name.lower())[:63]


def broker_of(block: MqttBlock | None, bench: str) -> Broker | None:
    """Build the broker of a file that has passed every check; None where the file names none."""
    if block is None:
        return None
    station = block.station or level_of(bench)
    return Broker(
        host=block.host, port=block.port or (TLS_PORT if block.tls else PLAIN_PORT), version=block.version,
        root=block.root, station=station, client=block.client or f"{block.root}-{station}"[:64], tls=block.tls,
        ca=block.ca or "", certificate=block.certificate or "", key=block.key or "", user=block.user or "",
        password_file=block.password_file or "", password_environment=block.password_environment or "",
        telemetry_s=block.telemetry, keep_alive_s=block.keep_alive, commands=block.commands,
        queue_folder=block.queue_folder or "", queue_events=block.queue_events)


def check_mqtt(b: "BenchFile", say: Say) -> Iterator[Finding]:
    """Secrets and stops travel only under TLS; keys that need each other stand together."""
    m = b.mqtt
    if m is None:
        return
    if (m.certificate is None) != (m.key is None):
        there, lacking = ("certificate", "key") if m.key is None else ("key", "certificate")
        yield say(REFUSE, f"mqtt.{there}", f"{lacking} beside it", "none")
    for name, value in (("ca", m.ca), ("certificate", m.certificate)):
        if value is not None and not m.tls:
            yield say(REFUSE, f"mqtt.{name}", "tls: yes", "tls: no", "TLS files are of no use without TLS")
    if m.password_file is not None and m.password_environment is not None:
        yield say(REFUSE, "mqtt.password_environment", "one place for the password", "a file and a variable")
    secret = "password_file" if m.password_file is not None else "password_environment"
    has_secret = m.password_file is not None or m.password_environment is not None
    if has_secret and m.user is None:
        yield say(REFUSE, f"mqtt.{secret}", "user beside it", "none")
    if m.tls or m.host in LOOPBACK:
        return
    if has_secret:
        yield say(REFUSE, f"mqtt.{secret}", "tls: yes, or a broker on this machine", "tls: no",
                  "a password must not cross a network in the clear")
    if m.commands:
        yield say(REFUSE, "mqtt.commands", "tls: yes, or a broker on this machine", "tls: no",
                  "whoever reads a command on the network could send its like")
    if not has_secret and not m.commands:
        yield say(NOTE, "mqtt.tls", "yes", "no", "whoever is on the network can read and forge what is published")
