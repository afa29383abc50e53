"""The plain flavour: one bench, calls that return when they are done, readings as an iterator.

One thread uses a bench; only ``lower`` and ``cut`` may be called from any other at any time, since each goes over a
connection of its own.  Readings have a connection of their own as well, so a loop over them may call everything else.
"""

import time
from collections.abc import Callable, Iterator, Mapping
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Any, Self

from hvhost.client import asking
from hvhost.client.asking import CONFIRM_S, CONFIRMED, NOT_CONFIRMED, POLL_S, Prepared
from hvhost.client.readings import Readings, Span, readings_in, still_s
from hvhost.client.runs import Record, Runs
from hvhost.publish.client import Client
from hvhost.publish.places import one_socket
from hvhost.publish.snapshot import Permission, Snapshot
from hvhost.publish.tickets import ticket_file, write_ticket
from hvhost.record.catalogue import RunSummary
from hvhost.words.errors import CannotConnect, CommandRefused

if TYPE_CHECKING:
    from types import TracebackType


def connect(bench: str = "", *, who: str = "") -> "Bench":
    """Connect to the daemon of a bench: its name or its socket's path; without one, the only bench served here.

    ``who`` goes on the record (default: the user's name).  Raises `CannotConnect`.
    """
    return Bench(one_socket(bench), who)


class Bench:
    """A connection to one daemon; leaving its block ends it, and frees control where this client had taken it."""

    def __init__(self, path: str, who: str = "") -> None:
        self.path = path
        self._who = asking.who_of(who)
        self._client = Client.connect(path)
        self._took = False

    def __enter__(self) -> Self:
        return self

    def __exit__(self, kind: "type[BaseException] | None", error: "BaseException | None",
                 trace: "TracebackType | None") -> None:
        self.close()

    def close(self) -> None:
        """End the connection; a direct run that nobody takes over is lowered 10 s later."""
        if self._took:
            ticket_file(self.path).unlink(missing_ok=True)
            self._took = False
        self._client.close()

    def _call(self, method: str, **params: Any) -> Any:
        """Ask for one method of the local socket; raises what the daemon raised."""
        return self._client.call(method, self._who.params(**params))

    # ------------------------------------------------------------ control

    def take_control(self, reason: str = "") -> None:
        """Take the seat, or share the one that ``hvhost seat`` or ``hvhost arm`` of this user holds.

        From another holder only with a reason.  It energises nothing.
        """
        kept = asking.kept_ticket(self.path)
        if kept and not self._who.ticket:
            shared = replace(self._who, ticket=kept)
            try:
                self._client.call("seat.check", shared.params())
            except CommandRefused:
                pass  # it is of a seat that is over
            else:
                self._who = shared
                return
        ticket = str(self._call("seat.take", reason=reason)["ticket"])
        self._who = replace(self._who, ticket=ticket)
        write_ticket(self.path, ticket)  # so that this user's `hvhost arm` commands in the same name
        self._took = True

    def release_control(self) -> None:
        """Free the seat where this client took it; a plan run goes on without, a direct run lowers after 10 s."""
        if self._took:
            self._call("seat.release")
            ticket_file(self.path).unlink(missing_ok=True)
        self._took = False
        self._who = replace(self._who, ticket="")

    def acknowledge(self) -> None:
        """Say that a stop by somebody else was seen; until then every set-point is refused."""
        self._need_control()
        self._call("seat.acknowledge")

    def _need_control(self) -> None:
        if not self._who.ticket:
            self.take_control()

    # ------------------------------------------------------------ acts

    def set(self, *, volts: float, amps: float, slew: float | None = None) -> None:
        """Head for a voltage and a current limit at ``slew`` V/s (default: the bench's), in an energised direct run.

        Takes control where nobody has it.  Magnitudes in the direction of the bench's polarity.
        """
        params = asking.set_params(volts, amps, slew)
        self._need_control()
        self._call("set", **params)

    def run(self, plan: str | Path, sheet: str | Path | None = None, *, specimen: str = "", operator: str = "",
            values: Mapping[str, str] | None = None, reason: str = "", repeat_of: str = "") -> Prepared:
        """Have a plan checked and its run prepared.  It is never armed from here: ``hvhost arm``, then the press."""
        params = asking.run_params(plan, sheet, specimen=specimen, operator=operator, values=values, reason=reason,
                                   repeat_of=repeat_of)
        self._need_control()
        return Prepared.of(self._call("run", **params))

    def direct(self, specimen: str, *, operator: str = "", reason: str = "") -> Prepared:
        """Prepare a direct run, for set-points by `set`; armed by ``hvhost arm`` and the press, never from here."""
        self._need_control()
        return Prepared.of(self._call("direct", specimen=specimen, operator=operator, reason=reason))

    def cancel(self) -> str:
        """Void a run that is prepared or armed; returns its name."""
        return str(self._call("cancel")["cancelled"])

    # ------------------------------------------------------------ stops

    def lower(self) -> None:
        """Ramp to zero at the down-slew, then cut; needs no control, from any thread."""
        with Client.connect(self.path) as line:
            line.call("lower", self._who.params())

    def cut(self) -> None:
        """Cut at once; needs no control, from any thread.  Returns when the cut is confirmed.

        Raises `CannotConnect` where it is not: use the emergency switching off.
        """
        try:
            with Client.connect(self.path) as line:
                line.call("cut", self._who.params())
                confirmed = _confirmed(line)
        except CannotConnect as fault:
            raise CannotConnect("a cut that is confirmed", str(fault), self.path, NOT_CONFIRMED) from None
        if not confirmed:
            raise CannotConnect("a cut that is confirmed", "no confirmation", self.path, NOT_CONFIRMED)

    # ------------------------------------------------------------ looking

    def status(self) -> Snapshot:
        """Everything that a screen shows, frozen."""
        return asking.snapshot_of(self._call("snapshot"))

    def wait_until(self, condition: Callable[[Snapshot], bool], timeout_s: float) -> Snapshot:
        """Look ten times a second until the condition holds; raises `CannotConnect` after ``timeout_s``."""
        until_s = time.monotonic() + timeout_s
        while not condition(snapshot := self.status()):
            if time.monotonic() >= until_s:
                raise CannotConnect("the condition to hold", f"{snapshot.permission} after {timeout_s:g} s", self.path)
            time.sleep(0.1)
        return snapshot

    def wait_energised(self, timeout_s: float = 120.0) -> Snapshot:
        """Wait until the run that was armed at the bench is energised."""
        return self.wait_until(lambda s: s.permission is Permission.RUNNING, timeout_s)

    def readings(self, *, every: int = 1, seconds: float | None = None) -> Iterator[Readings]:
        """Yield blocks of readings as they come, ten a second or so: each sample, or stretches of ``every`` samples.

        Ends after ``seconds`` of the board's time, or never.  A loop that is too slow loses the oldest, and each block
        says how many in ``dropped``.  Raises `CannotConnect` where none come for 5 s longer than a stretch may take.
        """
        span = Span(every, seconds)
        with Client.connect(self.path) as line:
            line.call("readings", {"every": every})
            block = None
            while block is None or not span.over(block):
                block = _next_readings(line, every)
                yield block

    def runs(self, where: str = "") -> tuple[RunSummary, ...]:
        """The catalogue of this bench's runs folder; ``where`` as in ``hvhost runs --where``."""
        return self._runs.list(where)

    def record(self, name: str = "last") -> Record:
        """The record of one run as arrays."""
        return self._runs.record(name)

    @property
    def _runs(self) -> Runs:
        return Runs(Path(str(self._call("status")["runs_folder"])))


def _next_readings(line: Client, every: int) -> Readings:
    patience_s = still_s(every)
    until_s = time.monotonic() + patience_s
    while (left_s := until_s - time.monotonic()) > 0.0:
        block = readings_in(line.notification(left_s))
        if block is not None:
            return block
    raise CannotConnect("readings", f"none for {patience_s:g} s", line.path, "see `hvhost status`")


def _confirmed(line: Client) -> bool:
    """Whether a snapshot made after the cut says that it is confirmed (S7)."""
    first, _ = asking.stop_of(line.call("snapshot"))
    until_s = time.monotonic() + CONFIRM_S
    while time.monotonic() < until_s:
        seq, stop = asking.stop_of(line.call("snapshot"))
        if seq > first and stop in (CONFIRMED, NOT_CONFIRMED):
            return stop == CONFIRMED
        time.sleep(POLL_S)
    return False
