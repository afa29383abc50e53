"""The topics of a station, in one table, each with the JSON Schema of what is sent on it.

A topic is ``<root>/v1/<station>/<name>``.  Every payload is one flat JSON object: numbers as numbers and finite, the
unit in the key, ``t`` in integer nanoseconds since 1970 UTC, ``seq`` counting by one within a topic.  ``session``
names one connection of one daemon: ``seq`` begins anew with it, and a command must carry it.  Events outlive
sessions: their ``seq`` goes on through restarts, and ``id`` tells a repeat.

There is no topic of its own for availability: a connection has one Last Will, so ``state`` carries ``available``.
"""

from dataclasses import dataclass
from typing import Any

LAYOUT = 1  # the 'v1' of every topic; what a consumer relies on changes only with it
STATE_EXPIRY_S = 60  # a retained state that nobody renews goes, also where a broker comes back without its client
STATE_EVERY_S = 20.0  # renewals of the state
EVENT_EXPIRY_S = 7 * 86_400  # for subscribers that are away, counted by the broker from the delivery
ANSWER_EXPIRY_S = 60
STATES = ("unknown", "idle", "requested", "proving", "warning", "ramp", "hold", "retreat", "rest", "running", "pausing",
          "lowering")
QUALITIES = ("good", "flagged", "gap", "none")
COMMANDS = ("lower", "cut")

TEXT: dict[str, Any] = {"type": "string", "maxLength": 500}
COUNT: dict[str, Any] = {"type": "integer", "minimum": 0}
NUMBER: dict[str, Any] = {"type": "number"}
YES: dict[str, Any] = {"type": "boolean"}
SESSION: dict[str, Any] = {"type": "string", "pattern": "^[0-9a-f]{16}-[0-9]{1,9}$",
                           "description": "one connection of one daemon"}
STAMP: dict[str, Any] = {"t": {"type": "integer", "minimum": 0, "description": "nanoseconds since 1970 UTC"},
                         "seq": {"type": "integer", "minimum": 0, "description": "counts by one within the topic"}}


@dataclass(frozen=True, slots=True, kw_only=True)
class Topic:
    """One row of the table.  ``expiry_s`` is the MQTT 5 message expiry, None for none; ``sent`` False: we receive."""

    name: str
    qos: int
    retained: bool
    expiry_s: int | None
    sent: bool
    about: str
    required: dict[str, Any]
    optional: dict[str, Any]

    def of(self, root: str, station: str) -> str:
        """The full topic of a station."""
        return f"{root}/v{LAYOUT}/{station}/{self.name}"

    def schema(self) -> dict[str, Any]:
        """The JSON Schema (2020-12) of the payload; nothing beside the named keys is sent or taken."""
        return {"$schema": "https://json-schema.org/draft/2020-12/schema", "title": self.name,
                "description": self.about, "type": "object", "properties": {**self.required, **self.optional},
                "required": list(self.required), "additionalProperties": False}


def _span(what: str, unit: str) -> dict[str, Any]:
    return {f"{what}_{part}_{unit}": NUMBER for part in ("min", "mean", "max")}


STATE = Topic(
    name="state", qos=1, retained=True, expiry_s=STATE_EXPIRY_S, sent=True,
    about="What the bench does.  The Last Will is an 'unknown' of the same session, without expiry: a daemon that is "
          "gone says nothing about the output.  An 'unknown' whose session is not that of the latest state is old.",
    required={**STAMP, "session": SESSION, "available": {**YES, "description": "a daemon is connected"},
              "state": {"enum": list(STATES)}},
    optional={"rehearsal": YES, "link": TEXT, "voltage": {**TEXT, "description": "never a leave to touch"},
              "power": TEXT, "latched": {**TEXT, "description": "causes, '; ' between them; empty for none"},
              "stop": TEXT, "run": TEXT, "plan": TEXT, "specimen": TEXT, "step": COUNT, "step_total": COUNT,
              "step_text": TEXT, "re_energises_in_s": {**NUMBER, "description": "arc pause: re-energises by itself"},
              "control": {**TEXT, "description": "who has the seat"}, "verdict": TEXT, "alarm": TEXT,
              "events_lost": COUNT, "commands_refused": COUNT})
DESCRIPTION = Topic(
    name="description", qos=1, retained=True, expiry_s=None, sent=True,
    about="What the bench is, sent once for each session.",
    required={**STAMP, "session": SESSION, "bench": TEXT, "title": TEXT, "program": TEXT,
              "polarity": {"enum": [-1, 1]}, "voltage_highest_kV": NUMBER, "current_highest_mA": NUMBER,
              "telemetry_interval_s": NUMBER, "commands": YES},
    optional={})
TELEMETRY = Topic(
    name="telemetry", qos=0, retained=False, expiry_s=None, sent=True,
    about="Least, mean and greatest of every sample in an interval that ends at t, so that no peak is hidden; with the "
          "sign of the bench's polarity.  Values that are not known are left out and quality says so.  Expires after "
          "two intervals, at least 5 s.",
    required={**STAMP, "session": SESSION, "interval_s": NUMBER, "pairs": COUNT, "quality": {"enum": list(QUALITIES)},
              "state": {"enum": list(STATES)}},
    optional={**_span("voltage", "kV"), **_span("current", "mA"), "voltage_u_kV": NUMBER, "current_u_mA": NUMBER,
              "voltage_set_kV": NUMBER, "current_set_mA": NUMBER, "flags": TEXT,
              "pairs_unseen": {**COUNT, "description": "samples of the interval that the extremes do not cover"}})
EVENT = Topic(
    name="event", qos=1, retained=False, expiry_s=EVENT_EXPIRY_S, sent=True,
    about="What happened, in order, at least once, from a queue on disk: drop what has an id that was seen.",
    required={**STAMP, "id": {"type": "string", "pattern": "^[0-9a-f]{16}-[0-9]{1,19}$"},
              "severity": {"enum": ["note", "attention", "trip"]}, "text": TEXT},
    optional={"run": TEXT, "rehearsal": YES})
ANSWER = Topic(
    name="answer", qos=1, retained=False, expiry_s=ANSWER_EXPIRY_S, sent=True,
    about="What became of a command.",
    required={**STAMP, "session": SESSION, "command": {"enum": list(COMMANDS)}, "accepted": YES, "text": TEXT},
    optional={"counter": COUNT, "from": TEXT})


def _command(name: str, about: str) -> Topic:
    return Topic(
        name=f"command/{name}", qos=1, retained=False, expiry_s=2, sent=False,
        about=f"{about}  Taken where the bench file says so; never retained, at most 10 s valid, and a counter that "
              "rises with each command of one sender.",
        required={"session": SESSION, "counter": {"type": "integer", "minimum": 0, "maximum": 2**63 - 1},
                  "expires": {"type": "integer", "minimum": 0, "maximum": 2**63 - 1,
                              "description": "nanoseconds since 1970 UTC"},
                  "from": {"type": "string", "pattern": "^[A-Za-z0-9._-]{1,64}$"}},
        optional={})


LOWER = _command("lower", "Ramp to zero at the down-slew, then cut.")
CUT = _command("cut", "Cut at once by every means the bench has.")
TOPICS: tuple[Topic, ...] = (STATE, DESCRIPTION, TELEMETRY, EVENT, ANSWER, LOWER, CUT)


def mqtt_schema() -> dict[str, Any]:
    """Every topic with its QoS, retention, expiry and payload schema, as ``hvhost schema mqtt`` prints it."""
    return {"layout": LAYOUT, "topic": f"<root>/v{LAYOUT}/<station>/<name>", "topics": {
        one.name: {"direction": "sent" if one.sent else "received", "qos": one.qos, "retained": one.retained,
                   "expiry_s": one.expiry_s, "payload": one.schema()} for one in TOPICS}}
