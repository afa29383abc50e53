"""Sentences and alarms of the broker: said once a minute, standing for a while, an event each."""

from hvhost.publish.mqtt.faults import TAKEN_OVER, BrokerFault
from hvhost.publish.mqtt.telling import AGAIN_S, ALARM_S, SHORT_SUSPICIOUS, Teller


class Told:
    """A teller in virtual time and what it told."""

    def __init__(self) -> None:
        self.now_s = 0.0
        self.said: list[str] = []
        self.events: list[str] = []
        self.teller = Teller("lab-b1", "b1", say=self.said.append, record=self.events.append, now_s=lambda: self.now_s)


def test_a_sentence_is_said_once_a_minute() -> None:
    """A broker that is gone for an hour is told 60 times, not thousands; another sentence is said at once."""
    told = Told()
    for n in range(3600):
        told.now_s = float(n)
        told.teller.say("gone")
    assert len(told.said) == 3600 / AGAIN_S
    told.teller.say("back")
    assert told.said[-1] == "mqtt: back"


def test_a_session_taken_over_is_an_alarm() -> None:
    """Reason 0x8E: an event, a sentence, and it stands in the state for ten minutes; again is no new event."""
    told = Told()
    fault = BrokerFault("session taken over", "broker:1883", code=TAKEN_OVER)
    assert told.teller.ended(fault, 1)
    assert told.teller.ended(fault, 2)
    assert told.teller.taken_over == 2
    assert "lab-b1" in told.teller.standing
    assert told.events == [f"MQTT: {told.teller.standing}"]
    told.now_s = ALARM_S
    assert told.teller.standing == ""
    assert told.teller.ended(fault, 1)
    assert len(told.events) == 2


def test_connections_that_end_soon_without_a_reason_are_suspicious() -> None:
    """A broker that gives no reason: some short connections in a row are told as what they may be."""
    told = Told()
    fault = BrokerFault("an end without a reason", "broker:1883")
    for short in range(1, SHORT_SUSPICIOUS):
        assert not told.teller.ended(fault, short)
    assert told.events == []
    assert not told.teller.ended(fault, SHORT_SUSPICIOUS), "a guess is no reason to stay away for a minute"
    assert "may be using the client id lab-b1" in told.teller.standing


def test_a_rival_is_named_by_the_station() -> None:
    """Another daemon on our topics is told as such."""
    told = Told()
    told.teller.rival()
    assert told.said == ["mqtt: another daemon publishes as station b1"]
