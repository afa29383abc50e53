"""What the operator is told of the broker: sentences that do not flood, and alarms that also reach the subscribers."""

from collections.abc import Callable

from hvhost.publish.mqtt.faults import BrokerFault
from hvhost.words.errors import CannotConnect

AGAIN_S = 60.0  # the same sentence at most so often: a broker that is gone all night must not fill the journal
ALARM_S = 600.0  # how long an alarm stands in the state
SHORT_SUSPICIOUS = 3  # connections that ended soon, in a row


class Teller:
    """``say`` tells the operator; ``record`` makes an event of an alarm; ``now_s`` is monotonic."""

    def __init__(self, client: str, station: str, *, say: Callable[[str], None], record: Callable[[str], None],
                 now_s: Callable[[], float]) -> None:
        self._client, self._station = client, station
        self._say, self._record, self._now_s = say, record, now_s
        self._said: dict[str, float] = {}
        self._alarm, self._until_s = "", float("-inf")
        self.taken_over = 0

    def say(self, words: str) -> None:
        """Say a sentence, unless it was said just now."""
        now_s = self._now_s()
        if now_s - self._said.get(words, float("-inf")) >= AGAIN_S:
            self._said = {said: at for said, at in self._said.items() if now_s - at < AGAIN_S} | {words: now_s}
            self._say(f"mqtt: {words}")

    def alarm(self, words: str) -> None:
        """An alarm is an event, stands in the state for a while, and is said."""
        if words != self.standing:
            self._record(f"MQTT: {words}")
        self.say(words)
        self._alarm, self._until_s = words, self._now_s() + ALARM_S

    @property
    def standing(self) -> str:
        """The alarm that the state is to tell, empty for none."""
        return self._alarm if self._now_s() < self._until_s else ""

    def ended(self, fault: CannotConnect, short: int) -> bool:
        """A connection ended, the ``short``-th soon one in a row: whether another client came with our id.

        The standard has the broker give that reason (MQTT-3.1.4-3); some give none, and 3.1.1 has no place for it.
        """
        if isinstance(fault, BrokerFault) and fault.taken_over:
            self.taken_over += 1
            self.alarm(f"session taken over: another client uses the client id {self._client}")
            return True
        if short >= SHORT_SUSPICIOUS:
            self.alarm(f"{SHORT_SUSPICIOUS} connections or more ended soon after the broker took them: another client "
                       f"may be using the client id {self._client}")
        return False

    def rival(self) -> None:
        """Somebody else publishes as this station."""
        self.alarm(f"another daemon publishes as station {self._station}")
