"""What can go wrong with a broker, in our own words."""

from hvhost.words.errors import CannotConnect

TAKEN_OVER = 0x8E  # Session taken over
NOT_AUTHORIZED = 0x87
BAD_PASSWORD = 0x86


class BrokerFault(CannotConnect):
    """No connection, or it ended.  ``code`` is the MQTT 5 reason, 0 where none was given."""

    def __init__(self, found: str, where: str, remedy: str = "", code: int = 0) -> None:
        super().__init__("a connection to the broker", found, where, remedy)
        self.code = code

    @property
    def taken_over(self) -> bool:
        """Another client came with our client id."""
        return self.code == TAKEN_OVER
