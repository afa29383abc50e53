"""What the commands that talk to a daemon share: the connection, the seat's ticket, one line of state."""

import argparse
import getpass
import os
from typing import Any

from hvhost.cli import exits
from hvhost.publish.client import Client
from hvhost.publish.places import one_socket
from hvhost.publish.tickets import read_ticket
from hvhost.words.errors import CommandRefused


def parser_of(name: str, about: str) -> argparse.ArgumentParser:
    """A parser with the options that every such command has."""
    parser = argparse.ArgumentParser(prog=f"hvhost {name}", description=about, epilog=exits.EPILOG,
                                     formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--socket", default="", metavar="NAME", help="bench name or path of its control socket")
    parser.add_argument("--as", dest="who", default="", metavar="NAME", help="your name, for the record")
    return parser


def who_of(options: argparse.Namespace) -> str:
    """The name that goes on the record."""
    if options.who:
        return str(options.who)
    try:
        return getpass.getuser()
    except (KeyError, OSError):
        return f"uid {os.getuid()}"


class Bench:
    """A connection to one daemon with the caller's name, and the seat's ticket where the caller has one."""

    def __init__(self, options: argparse.Namespace) -> None:
        self.path = one_socket(options.socket)
        self.who = who_of(options)
        self.client = Client.connect(self.path)
        self.ticket = ""

    def __enter__(self) -> "Bench":
        return self

    def __exit__(self, *_: object) -> None:
        self.client.close()

    def call(self, method: str, **params: Any) -> dict[str, Any]:
        """Ask for one method; raises what the daemon raised."""
        proof = {"ticket": self.ticket} if self.ticket else {}
        answer = self.client.call(method, {"as": self.who, **proof, **params})
        return answer if isinstance(answer, dict) else {}

    def take_seat(self, reason: str = "") -> None:
        """Use the ticket of a `hvhost seat` of the same user, or take the seat for this connection."""
        kept = read_ticket(self.path)
        if kept:
            self.ticket = kept
            try:
                self.call("seat.check")
            except CommandRefused:
                self.ticket = ""
            else:
                return
        self.ticket = str(self.call("seat.take", reason=reason)["ticket"])

    def status(self) -> dict[str, Any]:
        """The daemon's state."""
        return self.call("status")


def state_line(snapshot: dict[str, Any]) -> str:
    """The state of a bench in one plain line."""
    reading = snapshot.get("reading") or {}
    sign = -1 if snapshot.get("polarity", 1) < 0 else 1
    volts, amps = reading.get("volts"), reading.get("amps")
    shown = ("output unknown - use the emergency switching off" if volts is None or amps is None
             else f"{sign * volts / 1e3:.3f} kV {sign * amps * 1e3:.4f} mA")
    phase = snapshot.get("phase") or snapshot.get("permission", "")
    parts = [f"link {snapshot.get('link')}", str(phase), shown, f"voltage {snapshot.get('voltage')}"]
    if snapshot.get("latched"):
        parts.append("latched: " + ", ".join(snapshot["latched"]))
    if snapshot.get("warning_s") is not None:
        parts.append(f"energises in {snapshot['warning_s']:.1f} s")
    if snapshot.get("pause_s") is not None:
        parts.append(f"WILL RE-ENERGISE in {snapshot['pause_s']:.1f} s")
    if snapshot.get("stop"):
        parts.append(str(snapshot["stop"]))
    return "; ".join(parts)
