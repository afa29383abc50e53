"""Which numbered events of the MCU are missing, and how often they were asked for (PROTOCOL.md 8.7 to 8.9)."""

KEPT = 16  # events that the MCU can tell again
TRIES = 3


class EventBook:
    """The count of events of one boot, without gaps or with its gaps known."""

    def __init__(self) -> None:
        self.last = 0  # highest number known, heard or told by a block
        self.missing: set[int] = set()
        self.asking = False  # a request to tell again is on its way
        self.answered = False  # it was answered; what does not follow before the next block is not coming
        self.tries = 0

    def restart(self, last: int) -> None:
        """A greeting told the last number; what came before it is not waited for."""
        self.last, self.missing = last, set()
        self.asking = self.answered = False
        self.tries = 0

    def heard(self, number: int) -> tuple[bool, bool]:
        """Take a number; returns whether its event is news, and whether it is late (newer ones were known before)."""
        if number > self.last:
            self._passed(number - 1)
            self.last = number
            return True, False
        if number in self.missing:
            self.missing.discard(number)
            return True, True
        return False, False

    def told(self, number: int) -> None:
        """A block tells the number of the last event; those not heard are missing."""
        if number > self.last:
            self._passed(number)
            self.last = number

    @property
    def waiting(self) -> bool:
        """Whether there is anything to ask for, to wait for or to write down as lost."""
        return self.answered or bool(self.missing)

    def _passed(self, number: int) -> None:
        self.missing.update(range(max(self.last + 1, number - 4 * KEPT), number + 1))
        self.tries = 0

    def wanted(self) -> int | None:
        """The number from which on to ask again now, None where nothing is to be asked."""
        if not self.missing or self.asking or self.tries >= TRIES:
            return None
        return max(min(self.missing), self.last - KEPT + 1, 1)

    def asked(self) -> None:
        """The request was queued."""
        self.asking, self.answered = True, False
        self.tries += 1

    def done(self, *, gone: bool = False) -> None:
        """The request was answered, refused as older than what is kept (``gone``), or given up."""
        self.answered = True
        if gone:
            self.tries = TRIES

    def settle(self) -> list[int]:
        """A block came after the answer: return, once, the numbers that will not come any more."""
        if self.answered:
            self.asking = self.answered = False
        if self.asking or not self.missing or self.tries < TRIES:
            return []
        lost, self.missing = sorted(self.missing), set()
        return lost
