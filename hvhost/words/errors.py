"""The one tree of errors: each says what was expected, what was found, where, and what to do.

Nothing is imported here, so every floor may raise from this file.
"""


class HvhostError(Exception):
    """The root: a sentence an engineer can act on.

    ``expected`` and ``found`` describe the mismatch, ``where`` the place (``file:line``, a port, a field),
    ``remedy`` the next act.  Empty parts are left out of the sentence.
    """

    exit_code = 2

    def __init__(self, expected: str, found: str = "", where: str = "", remedy: str = "") -> None:
        self.expected, self.found, self.where, self.remedy = expected, found, where, remedy
        super().__init__(self._sentence())

    def _sentence(self) -> str:
        head = f"{self.where}: " if self.where else ""
        body = f"expected {self.expected}, found {self.found}" if self.found else self.expected
        tail = f"; {self.remedy}" if self.remedy else ""
        return f"{head}{body}{tail}"


class QuantityFault(HvhostError):
    """A text is not a quantity of the expected dimension."""


class WireFault(HvhostError):
    """A line or a field breaks the protocol's grammar."""


class FileFault(HvhostError):
    """A bench file, plan, run sheet or record is refused whole; ``findings`` lists every fault with its place."""

    exit_code = 5

    def __init__(self, expected: str, found: str = "", where: str = "", remedy: str = "",
                 findings: tuple[object, ...] = ()) -> None:
        super().__init__(expected, found, where, remedy)
        self.findings = findings


class CommandRefused(HvhostError):
    """The caller asked for what cannot be done now; nothing was done."""

    exit_code = 5


class CannotConnect(HvhostError):
    """A port, socket or daemon is missing, busy, not ours or forbidden."""

    exit_code = 6


class RecordFault(HvhostError):
    """The record cannot be written or read; a run ends safely on it."""

    exit_code = 7


class UsageFault(HvhostError):
    """The command line itself is wrong."""

    exit_code = 2
