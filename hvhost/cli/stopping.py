"""What ``lower`` and ``cut`` share: send the stop to the bench that is meant, print what was answered.

Nothing heavy is imported; a test compares ``sys.modules``.  Without ``--socket`` and with several daemons running
every bench gets the stop: whoever stops in a hurry must not be asked which.
"""

import json
import sys
import time

from hvhost.cli import exits
from hvhost.publish.client import Client
from hvhost.publish.places import chosen_sockets
from hvhost.words.errors import CannotConnect, HvhostError

CONFIRM_S = 2.0  # a confirmation takes one answer and one block: a hundredth of this on a healthy link
POLL_S = 0.02
CONFIRMED = "cut confirmed"
NOT_CONFIRMED = "cut not confirmed: use the emergency switching off"
NOT_LOWERED = "not lowered: if in doubt use the emergency switching off"

TYPE_CHECKING = False
if TYPE_CHECKING:
    from typing import Any


def stop_all(verb: str, option: str, as_json: bool) -> int:
    """Send ``verb`` to the bench named by ``option``, else to all; return the worst exit code."""
    try:
        paths = chosen_sockets(option)
    except CannotConnect as fault:
        return _tell(verb, "", {"error": str(fault)}, _advised(verb, fault), exits.CANNOT_CONNECT, as_json)
    return max(_stop_one(verb, path, as_json) for path in paths)


def _stop_one(verb: str, path: str, as_json: bool) -> int:
    try:
        with Client.connect(path) as bench:
            answer = bench.call(verb)
            stop = _confirmation(bench) if verb == "cut" else ""
    except HvhostError as fault:
        return _tell(verb, path, {"error": str(fault)}, _advised(verb, fault), fault.exit_code, as_json)
    text = answer.get("text", "") if isinstance(answer, dict) else str(answer or "")
    words = "; ".join(part for part in (text or f"{verb} taken", stop) if part)
    code = exits.PASSED if verb == "lower" or stop == CONFIRMED else exits.CANNOT_CONNECT
    return _tell(verb, path, {"answer": answer, "stop": stop}, words, code, as_json)


def _advised(verb: str, fault: HvhostError) -> str:
    return f"{fault}\n{NOT_CONFIRMED if verb == 'cut' else NOT_LOWERED}"


def _confirmation(bench: Client) -> str:
    """Return what became of the cut: only a snapshot made after it counts (S7)."""
    first = _stop_of(bench.call("snapshot"))
    until_s = time.monotonic() + CONFIRM_S
    while time.monotonic() < until_s:
        seq, stop = _stop_of(bench.call("snapshot"))
        if seq > first[0] and stop in (CONFIRMED, NOT_CONFIRMED):
            return stop
        time.sleep(POLL_S)
    return NOT_CONFIRMED


def _stop_of(snapshot: "Any") -> tuple[int, str]:
    if not isinstance(snapshot, dict):
        return -1, ""
    return int(snapshot.get("seq", -1)), str(snapshot.get("stop", ""))


def _tell(verb: str, path: str, data: "dict[str, Any]", words: str, code: int, as_json: bool) -> int:
    """Print the outcome: to standard output where it is an answer, to standard error where it is a fault."""
    if as_json:
        print(json.dumps({"command": verb, "socket": path, **data, "exit": code}))
    else:
        print(f"{verb}: {words}", file=sys.stderr if code else sys.stdout)
    return code
