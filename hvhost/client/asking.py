"""What both flavours of the client ask and how they read the answers; nothing here opens a socket.

Files are read here and sent as text: a daemon is never given a path.
"""

import getpass
import os
from base64 import b64encode
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from hvhost.publish.snapshot import Snapshot
from hvhost.publish.tickets import read_ticket
from hvhost.words.errors import CannotConnect, CommandRefused, FileFault
from hvhost.words.findings import Finding

CONFIRMED = "cut confirmed"
NOT_CONFIRMED = "cut not confirmed: use the emergency switching off"
CONFIRM_S = 2.0  # a confirmation takes one answer and one block
POLL_S = 0.02


@dataclass(frozen=True, slots=True, kw_only=True)
class Prepared:
    """A run that was checked and whose record is open; it is armed by ``hvhost arm`` and the press, never from here."""

    run: str
    title: str
    specimen: str
    folder: Path
    volts_highest: float
    duration_s: float
    findings: tuple[str, ...]

    @classmethod
    def of(cls, answer: Mapping[str, Any]) -> "Prepared":
        """Read the daemon's answer; raises `CannotConnect` where it is of another form."""
        try:
            return cls(run=str(answer["run"]), title=str(answer["title"]), specimen=str(answer["specimen"]),
                       folder=Path(str(answer["folder"])), volts_highest=float(answer["v_highest"]),
                       duration_s=float(answer["duration_s"]), findings=tuple(map(str, answer["findings"])))
        except (KeyError, TypeError, ValueError):
            raise CannotConnect("an answer of this version", "another form", "run", "is it a daemon of ours?") from None


@dataclass(frozen=True, slots=True, kw_only=True)
class Who:
    """In whose name requests are made, and the ticket of the seat where this client has one."""

    name: str
    ticket: str = ""

    def params(self, **params: Any) -> dict[str, Any]:
        """The parameters of a request."""
        return {"as": self.name, **({"ticket": self.ticket} if self.ticket else {}), **params}


def who_of(name: str) -> Who:
    """The name given, else the user's."""
    if name:
        return Who(name=name)
    try:
        return Who(name=getpass.getuser())
    except (KeyError, OSError):
        return Who(name=f"uid {os.getuid()}")


def kept_ticket(path: str) -> str:
    """The ticket that ``hvhost seat`` or ``hvhost arm`` of the same user keeps, '' where there is none."""
    return read_ticket(path)


def set_params(volts: float, amps: float, slew: float | None) -> dict[str, Any]:
    """Parameters of ``set``; raises `CommandRefused` for what is no finite number."""
    values = {"volts": volts, "amps": amps, **({} if slew is None else {"slew": slew})}
    out = {}
    for name, value in values.items():
        try:
            number = float(value)
        except (TypeError, ValueError):
            raise CommandRefused("a number", repr(value)[:40], name) from None
        if not 0.0 <= number < float("inf"):
            raise CommandRefused("a finite number, zero or above", repr(value)[:40], name,
                                 "magnitudes in the direction of the bench's polarity")
        out[name] = number
    return out


def run_params(plan: str | Path, sheet: str | Path | None, *, specimen: str, operator: str,
               values: Mapping[str, str] | None, reason: str, repeat_of: str) -> dict[str, Any]:
    """Parameters of ``run``: texts of the files, or what was typed instead of a sheet."""
    path = Path(plan)
    params: dict[str, Any] = {"plan": text_of(path), "plan_file": path.name, "operator": operator, "reason": reason,
                              "repeat_of": repeat_of, "specimen": specimen}
    if sheet is not None:
        return {**params, "sheet": text_of(Path(sheet)), "sheet_file": Path(sheet).name}
    return {**params, "values": dict(values or {})}


def text_of(path: Path) -> str:
    """The text of a file as base64, which keeps a request on one line; raises `FileFault` naming the file."""
    try:
        return b64encode(path.read_text(encoding="utf-8").encode("utf-8")).decode("ascii")
    except (OSError, UnicodeDecodeError) as error:
        raise FileFault("a readable text file", getattr(error, "strerror", None) or str(error), str(path)) from None


def snapshot_of(answer: Any) -> Snapshot:
    """The snapshot in an answer; raises `CannotConnect` where there is none yet."""
    if answer is None:
        raise CannotConnect("a snapshot", "none yet", "status", "the daemon has only just begun: try again")
    return Snapshot.from_json(answer)


def stop_of(answer: Any) -> tuple[int, str]:
    """Number of a snapshot and what it says of the last cut."""
    return (int(answer.get("seq", -1)), str(answer.get("stop", ""))) if isinstance(answer, dict) else (-1, "")


def findings_text(error: FileFault) -> str:
    """Every finding of a refused file, a line each."""
    return "\n".join(f.text if isinstance(f, Finding) else str(f) for f in error.findings)
