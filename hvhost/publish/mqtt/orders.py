"""Judging a command that came from a broker: refused whole with a sentence, or a stop to be done at once.

A payload is hostile until it has passed: length, UTF-8, JSON without repeated keys or numbers that are none, exactly
the keys of its schema, this session, an absolute expiry near enough that nothing older need be remembered, and a
counter that rises for each sender.  Nothing but `lower` and `cut` can be asked for, and both only make safer.
"""

import json
import re
from collections import OrderedDict
from dataclasses import dataclass
from typing import Any

from hvhost.publish.mqtt.topics import COMMANDS
from hvhost.words.errors import CommandRefused

LONGEST = 512  # bytes: four short values
VALID_S = 10.0  # an expiry further ahead would have to be remembered longer
SENDERS_KEPT = 256  # within VALID_S
MOST_PER_S, BURST = 20.0, 20.0
KEYS = frozenset({"session", "counter", "expires", "from"})
SENDER = re.compile(r"[A-Za-z0-9._-]{1,64}", re.ASCII)
LARGEST = 2**63 - 1


@dataclass(frozen=True, slots=True, kw_only=True)
class Order:
    """A command that may be carried out."""

    command: str
    counter: int
    sender: str


class Orders:
    """What was taken lately; times are monotonic seconds for rates, UTC nanoseconds for expiry."""

    def __init__(self) -> None:
        self.accepted = 0
        self.refused = 0
        self._counters: OrderedDict[str, tuple[int, int]] = OrderedDict()  # sender -> (counter, UTC ns of its expiry)
        self._room = dict.fromkeys(COMMANDS, BURST)  # of each command its own: no flood of lowers delays a cut
        self._filled_s: dict[str, float] = {}

    def take(self, command: str, payload: bytes, *, retained: bool, session: str, now_s: float,
             utc_ns: int) -> Order:
        """Return the order, or raise `CommandRefused`; either is counted."""
        try:
            order = self._judged(command, payload, retained, session, now_s, utc_ns)
        except CommandRefused:
            self.refused += 1
            raise
        self.accepted += 1
        return order

    def _judged(self, command: str, payload: bytes, retained: bool, session: str, now_s: float,
                utc_ns: int) -> Order:
        if command not in COMMANDS:
            raise CommandRefused(" or ".join(COMMANDS), repr(command)[:60], "command")
        if retained:
            raise CommandRefused("a message that is not retained", "a retained one", command,
                                 "a broker would repeat it after every restart")
        data = parse(payload)
        if data["session"] != session:
            raise CommandRefused("the session of the present state", repr(data["session"])[:40], command,
                                 "read the state topic and ask again")
        left_s = (data["expires"] - utc_ns) / 1e9
        if not 0.0 < left_s <= VALID_S:
            found = f"expired {-left_s:.1f} s ago" if left_s <= 0.0 else f"{left_s:.1f} s ahead"
            raise CommandRefused(f"an expiry within the next {VALID_S:g} s", found, command,
                                 "see that both clocks are right")
        self._forget(utc_ns)
        last = self._counters.get(data["from"])
        if last is not None and data["counter"] <= last[0]:
            raise CommandRefused(f"a counter above {last[0]}", str(data["counter"]), command,
                                 "a repeat is not done twice")
        self._spend(now_s, command)
        self._counters[data["from"]] = (data["counter"], max(data["expires"], last[1] if last else 0))
        self._counters.move_to_end(data["from"])
        while len(self._counters) > SENDERS_KEPT:
            self._counters.popitem(last=False)
        return Order(command=command, counter=data["counter"], sender=data["from"])

    def _forget(self, utc_ns: int) -> None:
        """A counter need be known only while something that carried it could still be valid."""
        for sender in [s for s, (_, expires) in self._counters.items() if expires + VALID_S * 1e9 < utc_ns]:
            del self._counters[sender]

    def _spend(self, now_s: float, command: str) -> None:
        passed_s = max(0.0, now_s - self._filled_s.get(command, now_s))
        self._filled_s[command] = now_s
        self._room[command] = min(BURST, self._room[command] + passed_s * MOST_PER_S)
        if self._room[command] < 1.0:
            raise CommandRefused(f"at most {MOST_PER_S:g} a second", "more", command, "the ones before were done")
        self._room[command] -= 1.0


def parse(payload: bytes) -> dict[str, Any]:
    """The four values of a command; raises `CommandRefused` at whatever is not exactly that."""
    if len(payload) > LONGEST:
        raise CommandRefused(f"at most {LONGEST} bytes", f"{len(payload)} bytes", "command")
    try:
        data = json.loads(payload.decode("utf-8"), object_pairs_hook=_once, parse_constant=_no_constant)
    except (ValueError, RecursionError):
        raise CommandRefused("one flat JSON object", repr(payload[:40])[1:], "command") from None
    if not isinstance(data, dict) or data.keys() != KEYS:
        found = ", ".join(sorted(map(str, data)))[:80] if isinstance(data, dict) else type(data).__name__
        raise CommandRefused(f"exactly the keys {', '.join(sorted(KEYS))}", found or "none", "command")
    for key in ("counter", "expires"):
        value = data[key]
        if type(value) is not int or not 0 <= value <= LARGEST:
            raise CommandRefused("a whole number from 0 up", repr(value)[:40], key)
    for key in ("session", "from"):
        if not isinstance(data[key], str) or SENDER.fullmatch(data[key]) is None:
            raise CommandRefused("1 to 64 letters, digits, '.', '_' or '-'", repr(data[key])[:40], key)
    return data


def _once(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
    data = dict(pairs)
    if len(data) != len(pairs):
        raise ValueError("a key twice")
    return data


def _no_constant(word: str) -> Any:
    raise ValueError(word)
