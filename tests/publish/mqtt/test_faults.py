"""A broker's fault is an error of ours: expected, found, where, remedy, and the reason's number."""

from hvhost.publish.mqtt.faults import NOT_AUTHORIZED, TAKEN_OVER, BrokerFault
from hvhost.words.errors import CannotConnect


def test_a_fault_says_where_and_what_to_do() -> None:
    """One sentence; the reasons are those of MQTT 5, 2.4: 0x87 not authorized, 0x8E session taken over."""
    fault = BrokerFault("not authorized", "broker:8883", "see the broker's access list", NOT_AUTHORIZED)
    assert isinstance(fault, CannotConnect)
    assert str(fault) == ("broker:8883: expected a connection to the broker, found not authorized; "
                          "see the broker's access list")
    assert (NOT_AUTHORIZED, TAKEN_OVER) == (0x87, 0x8E)
    assert not fault.taken_over
    assert BrokerFault("x", "y", code=TAKEN_OVER).taken_over
