"""What the port has not taken yet."""

from hvhost.wire.outbox import Outbox


def test_the_order_is_stops_rest_renewal() -> None:
    """A stop throws the rest away; without one the rest leaves alone; a renewal follows a stop or comes by itself."""
    box = Outbox()
    box.rest, box.renewal = b"rest", b"renewal"
    assert box.take(b"\nstop") == (b"\nstoprenewal", True)
    box.rest, box.renewal = b"rest", b"renewal"
    assert box.take(b"") == (b"rest", False)
    assert box.take(b"") == (b"renewal", True)
    assert box.take(b"") == (b"", True)


def test_after_a_stall_the_torn_line_is_ended() -> None:
    """What was thrown away may have left half a line on the wire: the next bytes begin with LF, once."""
    box = Outbox()
    box.rest, box.renewal = b"rest", b"renewal"
    box.stale()
    box.stale()
    assert box.take(b"") == (b"\n", True)
    assert box.take(b"") == (b"", True)


def test_a_stall_without_a_rest_leaves_nothing() -> None:
    """Where no line was torn no LF is sent."""
    box = Outbox()
    box.renewal = b"renewal"
    box.stale()
    assert box.take(b"") == (b"", True)
