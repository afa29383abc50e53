"""What has been handed to the port but not taken by it, and the one renewal that waits to leave.

The order on the line is: stops, then the rest of a half-sent line, then a renewal, then requests.  A stop throws the
rest away, since it begins with LF and waits behind nothing; after a stall the rest is stale and is thrown away too,
and whatever leaves next begins with LF.  While a rest waits nothing else is added, so a port that takes nothing keeps
at most one piece of output here.
"""


class Outbox:
    """At most one rest and one renewal."""

    __slots__ = ("_torn", "renewal", "rest")

    def __init__(self) -> None:
        self.rest = b""
        self.renewal = b""
        self._torn = False

    @property
    def empty(self) -> bool:
        """True where nothing waits to leave."""
        return not (self.rest or self.renewal or self._torn)

    def stale(self) -> None:
        """Throw away what waited through a stall."""
        self._torn, self.rest, self.renewal = self._torn or bool(self.rest), b"", b""

    def take(self, stops: bytes) -> tuple[bytes, bool]:
        """Return what leaves first, given the stops that are due, and whether requests may follow it."""
        if stops:
            self.rest, self._torn = b"", False
        elif self.rest:
            rest, self.rest = self.rest, b""
            return rest, False
        elif self._torn:
            stops, self._torn = b"\n", False
        out, self.renewal = stops + self.renewal, b""
        return out, True
