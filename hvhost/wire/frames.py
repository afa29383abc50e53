"""Typed frames, and the one table from a line's first word to its class, its fields and their ranges.

A body is ``verb field field ... [key=value ...]`` with single spaces.  The fields of a verb stand in a fixed order;
optional ones follow as ``key=value`` in any order, unknown keys are skipped.  See PROTOCOL.md sections 3 to 8.
"""

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

from hvhost.wire.blocks import PAIRS_MAX as PAIRS_MAX
from hvhost.wire.blocks import Block as Block
from hvhost.wire.blocks import decode_block as decode_block
from hvhost.wire.blocks import encode_block as encode_block
from hvhost.wire.blocks import pack_codes as pack_codes
from hvhost.wire.blocks import type_of_pack as type_of_pack
from hvhost.wire.blocks import unpack_codes as unpack_codes
from hvhost.wire.fields import CODE, FLAG, HEX8, NUMBER, VALUE, WORD, Kind, i32, u32, word
from hvhost.wire.settings import TIGHTENABLE
from hvhost.words.errors import WireFault

SNAP_PAIRS = 40  # pairs in one answer to `snap`


# ---------------------------------------------------------------- host -> MCU


@dataclass(frozen=True, slots=True, kw_only=True)
class Hello:
    """Opens a session: 32-bit random session number, protocol version, lease in ms."""

    n: int = 0
    session: int = 0
    version: int
    lease_ms: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Info:
    """Asks for one page of the greeting (0 identity, 1 converters, 2 timing, 3 state)."""

    n: int = 0
    session: int = 0
    page: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Get:
    """Asks for one page of the settings: ``settings.PAGE`` values in table order."""

    n: int = 0
    session: int = 0
    page: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Put:
    """Stages one setting; nothing changes until `Save`."""

    n: int = 0
    session: int = 0
    key: str
    value: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Save:
    """Writes the staged settings whole to EEPROM if their checksum is this one (interlock open)."""

    n: int = 0
    session: int = 0
    checksum: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Arm:
    """Asks for permission to energise one run.

    ``pause`` is (count, rest_ms, window_ms) or None for *latch*; ``tighter`` holds settings made stricter for this
    arm only.
    """

    n: int = 0
    session: int = 0
    arm: int
    tag: int
    settings: int
    event: int
    pause: tuple[int, int, int] | None = None
    tighter: Mapping[str, int] = field(default_factory=dict)


@dataclass(frozen=True, slots=True, kw_only=True)
class Segment:
    """Queues a segment: target words of both channels and the ticks to get there; ``arc`` only after a pause."""

    n: int = 0
    session: int = 0
    v: int
    i: int
    ticks: int
    arc: int | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Renew:
    """Renews the lease by the index of the last sample judged (low 32 bits); never answered."""

    session: int = 0
    index: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Lower:
    """Asks for a ramp to zero and then a cut; ``n`` is a stop number."""

    n: int = 0
    session: int = 0


@dataclass(frozen=True, slots=True, kw_only=True)
class ArcSeen:
    """Tells that the host judged a breakdown at this sample index; ``n`` is a stop number."""

    n: int = 0
    session: int = 0
    index: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Cut:
    """Cuts now; needs no session; ``n`` is a stop number; ``rule`` 0 for an operator, else the HostRule."""

    n: int = 0
    rule: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Reset:
    """Clears the latch if ``causes`` is the whole latched set; ``grounded`` 1 declares 'grounded by hand'."""

    n: int = 0
    session: int = 0
    causes: int
    grounded: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Again:
    """Asks for the events from this number on (the last 16 are kept)."""

    n: int = 0
    session: int = 0
    event: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Snap:
    """Asks for the part of the waiting snapshot that begins at this pair."""

    n: int = 0
    session: int = 0
    offset: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Stored:
    """Confirms that the snapshot with this id is safely stored."""

    n: int = 0
    session: int = 0
    snapshot: int


# ---------------------------------------------------------------- MCU -> host


@dataclass(frozen=True, slots=True, kw_only=True)
class Ok:
    """The answer to request (or stop) ``n``; ``words`` are the verb's positional results, ``pairs`` its options."""

    n: int
    verb: str
    words: tuple[str, ...] = ()
    pairs: Mapping[str, str] = field(default_factory=dict)


@dataclass(frozen=True, slots=True, kw_only=True)
class Refusal:
    """The error answer to request ``n``: a code of ``vocabulary.Err`` (kept as text: a newer MCU may know more)."""

    n: int
    verb: str
    code: str


@dataclass(frozen=True, slots=True, kw_only=True)
class McuEvent:
    """A numbered event with its tick and two integers whose meaning belongs to the kind."""

    number: int
    tick: int
    kind: str
    a: int
    b: int


# ---------------------------------------------------------------- the codec


@dataclass(frozen=True, slots=True)
class Verb:
    """How one request is written: its class and its positional fields in order."""

    frame: type
    fields: tuple[tuple[str, Kind], ...]


_N: tuple[tuple[str, Kind], ...] = (("n", NUMBER), ("session", HEX8))

REQUESTS: dict[str, Verb] = {
    "hello": Verb(Hello, (*_N, ("version", NUMBER), ("lease_ms", NUMBER))),
    "info": Verb(Info, (*_N, ("page", NUMBER))),
    "get": Verb(Get, (*_N, ("page", NUMBER))),
    "put": Verb(Put, (*_N, ("key", WORD), ("value", VALUE))),
    "save": Verb(Save, (*_N, ("checksum", HEX8))),
    "arm": Verb(Arm, (*_N, ("arm", NUMBER), ("tag", HEX8), ("settings", HEX8), ("event", NUMBER))),
    "seg": Verb(Segment, (*_N, ("v", CODE), ("i", CODE), ("ticks", NUMBER))),
    "renew": Verb(Renew, (("session", HEX8), ("index", NUMBER))),
    "lower": Verb(Lower, _N),
    "arc": Verb(ArcSeen, (*_N, ("index", NUMBER))),
    "cut": Verb(Cut, (("n", NUMBER), ("rule", NUMBER))),
    "reset": Verb(Reset, (*_N, ("causes", HEX8), ("grounded", FLAG))),
    "again": Verb(Again, (*_N, ("event", NUMBER))),
    "snap": Verb(Snap, (*_N, ("offset", NUMBER))),
    "stored": Verb(Stored, (*_N, ("snapshot", NUMBER))),
}
VERB_OF: dict[type, str] = {verb.frame: word for word, verb in REQUESTS.items()}
STOPS = frozenset({"cut", "lower", "arc"})

Asked = Hello | Info | Get | Put | Save | Arm | Segment | Reset | Again | Snap | Stored  # numbered, one outstanding
Request = Asked | Renew | Lower | ArcSeen | Cut
Received = Ok | Refusal | Block | McuEvent


def encode_request(frame: Request) -> bytes:
    """Return the body of a request."""
    verb = VERB_OF[type(frame)]
    parts = [verb, *(write(getattr(frame, name)) for name, (_, write) in REQUESTS[verb].fields)]
    if isinstance(frame, Arm):
        if frame.pause is not None:
            parts.append("pause=" + ",".join(map(str, frame.pause)))
        parts += [f"{key}={value}" for key, value in frame.tighter.items()]
    if isinstance(frame, Segment) and frame.arc is not None:
        parts.append(f"arc={frame.arc}")
    return " ".join(parts).encode("ascii")


def renewal(session: int, index: int) -> bytes:
    """Return the body of a `Renew` as `encode_request` gives it, the short way: it is sent all the time."""
    return b"renew %08X %d" % (session, index)


def split_body(body: bytes) -> tuple[str, list[str], dict[str, str]]:
    """Return verb, positional words and ``key=value`` pairs of a body; malformed ones raise `WireFault`."""
    verb, *rest = body.decode("ascii").split(" ")
    words: list[str] = []
    pairs: dict[str, str] = {}
    for part in rest:
        key, equals, value = part.partition("=")
        option = bool(equals and value) and value[0] != "=" and key.isalnum() and key.islower()  # base64 ends with =
        if not option and not pairs:
            words.append(part)
        elif not option:
            raise WireFault("fields, then key=value", repr(part), verb)
        elif key in pairs:
            raise WireFault("each key once", repr(key), verb)
        else:
            pairs[key] = value
    return verb, words, pairs


def decode_request(body: bytes) -> Request:
    """Return the typed request, or raise `WireFault` (its ``where`` is the verb, 'unknown' when it is not ours)."""
    verb, words, pairs = split_body(body)
    if verb not in REQUESTS:
        raise WireFault("a request of the table", repr(verb), "unknown")
    spec = REQUESTS[verb]
    if len(words) != len(spec.fields):
        raise WireFault(f"{len(spec.fields)} fields", str(len(words)), verb)
    values: dict[str, Any] = {name: read(text) for (name, (read, _)), text in zip(spec.fields, words, strict=True)}
    if verb == "arm":
        values["tighter"] = {key: u32(pairs[key]) for key in TIGHTENABLE if key in pairs}
        if "pause" in pairs:
            numbers = tuple(u32(text) for text in pairs["pause"].split(","))
            if len(numbers) != 3:
                raise WireFault("count,rest,window", pairs["pause"], verb)
            values["pause"] = numbers
    if verb == "seg" and "arc" in pairs:
        values["arc"] = u32(pairs["arc"])
    frame: Request = spec.frame(**values)
    return frame


def encode_answer(frame: Ok | Refusal | McuEvent) -> bytes:
    """Return the body of an answer or event."""
    if isinstance(frame, McuEvent):
        return f"ev {frame.number} {frame.tick} {frame.kind} {frame.a} {frame.b}".encode("ascii")
    if isinstance(frame, Refusal):
        return f"err {frame.n} {frame.verb} {frame.code}".encode("ascii")
    parts = ["ok", str(frame.n), frame.verb, *frame.words, *(f"{k}={v}" for k, v in frame.pairs.items())]
    return " ".join(parts).encode("ascii")


def decode_received(body: bytes, signs: str) -> Received:
    """Return the typed frame of one body from the MCU, or raise `WireFault`."""
    if body[:2] == b"b ":
        return decode_block(body, signs)
    verb, words, pairs = split_body(body)
    if verb == "ok" and len(words) >= 2:
        return Ok(n=u32(words[0]), verb=word(words[1]), words=tuple(words[2:]), pairs=pairs)
    if verb == "err" and len(words) == 3:
        return Refusal(n=u32(words[0]), verb=word(words[1]), code=word(words[2]))
    if verb == "ev" and len(words) == 5:
        return McuEvent(number=u32(words[0]), tick=u32(words[1]), kind=word(words[2]), a=i32(words[3]),
                        b=i32(words[4]))
    raise WireFault("ok, err, ev or b with their fields", repr(body[:40].decode("ascii")), "received line")
