"""The status model of IEEE 488.2 and SCPI-99: pure, one for each connection.

Theory.  A *condition* is what is true now.  The transition filters pass its rises (PTR) or falls (NTR) into the
*event* register, which keeps them until it is read.  Events that are enabled make a summary bit in the status byte::

    condition --PTR/NTR--> event --ENABle--> bit of the status byte --SRE--> master summary (bit 6)

The standard event register has no condition: commands, errors and the end of operations set its bits directly.
Bit 15 of the 16-bit registers is always 0 (SCPI-99 volume 1, 9.1), so that a reader may take them as signed.
"""

from enum import IntFlag

from hvhost.publish.instrument.errors import Err, ErrorQueue, esr_bit

BITS_16 = 0x7FFF
BITS_8 = 0xFF


class StatusByte(IntFlag):
    """IEEE 488.2, 11.2; bits 2, 3 and 7 as SCPI-99 gives them."""

    ERRORS = 1 << 2  # the error queue is not empty
    QUESTIONABLE = 1 << 3
    MESSAGE = 1 << 4  # MAV: an answer waits in the output queue
    EVENT = 1 << 5  # ESB
    MASTER = 1 << 6  # MSS
    OPERATION = 1 << 7


class StandardEvent(IntFlag):
    """IEEE 488.2, 11.5.1."""

    OPERATION_COMPLETE = 1 << 0
    REQUEST_CONTROL = 1 << 1
    QUERY_ERROR = 1 << 2
    DEVICE_ERROR = 1 << 3
    EXECUTION_ERROR = 1 << 4
    COMMAND_ERROR = 1 << 5
    USER_REQUEST = 1 << 6
    POWER_ON = 1 << 7


class Register:
    """One 16-bit register set with filters; as STATus:PRESet leaves it, and with no event."""

    def __init__(self) -> None:
        self.condition = self.event = self.enable = self.ntr = 0
        self.ptr = BITS_16

    def show(self, condition: int) -> None:
        """Take the condition as it is now; what rose or fell passes the filters into the event register."""
        condition &= BITS_16
        rose, fell = condition & ~self.condition, self.condition & ~condition
        self.event |= (rose & self.ptr) | (fell & self.ntr)
        self.condition = condition

    def take_event(self) -> int:
        """Read the events, which clears them."""
        event, self.event = self.event, 0
        return event

    def preset(self) -> None:
        """STATus:PRESet: nothing enabled, rises pass, falls do not (SCPI-99 volume 2, 20.7)."""
        self.enable = self.ntr = 0
        self.ptr = BITS_16

    @property
    def summary(self) -> bool:
        """Whether an enabled event stands."""
        return bool(self.event & self.enable)


class Status:
    """Everything that one connection's status byte is made of."""

    def __init__(self) -> None:
        self.errors = ErrorQueue()
        self.operation, self.questionable = Register(), Register()
        self.esr = int(StandardEvent.POWER_ON)  # these registers are fresh: whatever an earlier connection set is gone
        self.ese = 0
        self._sre = 0

    @property
    def sre(self) -> int:
        """Service request enable; bit 6 is always 0 (IEEE 488.2, 11.3.2)."""
        return self._sre

    @sre.setter
    def sre(self, mask: int) -> None:
        self._sre = mask & BITS_8 & ~StatusByte.MASTER

    def error(self, number: Err, information: str = "") -> None:
        """Queue an error and set its event bit."""
        bit = esr_bit(number)
        if bit is not None:
            self.esr |= 1 << bit
        self.errors.push(number, information)

    def operation_complete(self) -> None:
        """*OPC: what was pending is over."""
        self.esr |= StandardEvent.OPERATION_COMPLETE

    def take_esr(self) -> int:
        """*ESR?: read the standard events, which clears them."""
        esr, self.esr = self.esr, 0
        return esr

    def byte(self, *, message: bool) -> int:
        """*STB?: the status byte with the master summary in bit 6; ``message``: an answer waits."""
        parts = ((len(self.errors), StatusByte.ERRORS), (self.questionable.summary, StatusByte.QUESTIONABLE),
                 (message, StatusByte.MESSAGE), (self.esr & self.ese, StatusByte.EVENT),
                 (self.operation.summary, StatusByte.OPERATION))
        byte = sum(int(bit) for on, bit in parts if on)
        return byte | (int(StatusByte.MASTER) if byte & self._sre else 0)

    def clear(self) -> None:
        """*CLS: no event, no error; enables and filters stay (IEEE 488.2, 10.3)."""
        self.esr = self.operation.event = self.questionable.event = 0
        self.errors.clear()

    def preset(self) -> None:
        """STATus:PRESet: the two device registers; event registers, queue, ESE and SRE stay."""
        self.operation.preset()
        self.questionable.preset()
