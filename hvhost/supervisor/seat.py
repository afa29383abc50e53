"""The seat: the right to command.  One holder at a time, taken by an explicit act; anyone may stop without it."""

from dataclasses import dataclass

from hvhost.words.errors import CommandRefused


@dataclass(frozen=True, slots=True, kw_only=True)
class Holder:
    """Who has control: a name for people, a ticket that proves it."""

    name: str
    ticket: str


class Seat:
    """Who may command, and since when nobody does."""

    def __init__(self) -> None:
        self.holder: Holder | None = None
        self.empty_since_s: float | None = 0.0
        self.stopped_by: str = ""  # a stop by someone else, not yet acknowledged by the holder

    def take(self, name: str, ticket: str, now_s: float, *, reason: str = "") -> str:
        """Give the seat to ``name``; from another holder only with a reason.  Returns who had it."""
        before = self.holder
        if before is not None and before.ticket != ticket and not reason:
            raise CommandRefused("the seat to be free, or a reason for taking it over",
                                 f"control is with {before.name}", "seat",
                                 "ask them to release it, or take it over with --reason TEXT")
        self.holder = Holder(name=name, ticket=ticket)
        self.empty_since_s = None
        if before is None or before.ticket != ticket:
            self.stopped_by = ""
        return before.name if before is not None else ""

    def release(self, ticket: str, now_s: float) -> bool:
        """Free the seat if this ticket holds it."""
        if self.holder is None or self.holder.ticket != ticket:
            return False
        self.holder = None
        self.empty_since_s = now_s
        return True

    def holds(self, ticket: str) -> bool:
        """Whether this ticket has the seat."""
        return self.holder is not None and self.holder.ticket == ticket

    def require(self, ticket: str) -> None:
        """Raise unless this ticket holds the seat and has acknowledged any stop by someone else."""
        if self.holder is None:
            raise CommandRefused("control of the bench", "nobody has it", "seat",
                                 "take it with `hvhost seat` or let the command take it")
        if self.holder.ticket != ticket:
            raise CommandRefused("control of the bench", f"control is with {self.holder.name}", "seat",
                                 "ask them to release it; stopping needs no control")
        if self.stopped_by:
            raise CommandRefused("the stop to be acknowledged first", f"stopped by {self.stopped_by}", "seat",
                                 "acknowledge it with `hvhost seat --acknowledge`")

    def stopped(self, by_ticket: str, by_name: str) -> None:
        """Someone stopped the bench: the holder must acknowledge before commanding again."""
        if self.holder is not None and self.holder.ticket != by_ticket:
            self.stopped_by = by_name

    def acknowledge(self, ticket: str) -> None:
        """The holder has seen the stop."""
        if self.holder is None or self.holder.ticket != ticket:
            self.require(ticket)
        self.stopped_by = ""

    def empty_s(self, now_s: float) -> float:
        """Seconds for which nobody has had control."""
        return 0.0 if self.empty_since_s is None else max(0.0, now_s - self.empty_since_s)
