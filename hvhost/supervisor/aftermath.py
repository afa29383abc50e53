"""What an MCU still knows of an earlier run when it is greeted: causes and events, for that run's record.

The MCU keeps causes and snapshot under the run's tag through lost links and boots.  They are read before anything may
be armed again; whoever keeps the records takes what is ``ready`` and appends it to the run whose tag it carries.
"""

from dataclasses import dataclass

from hvhost.supervisor.runs import told_causes
from hvhost.wire.frames import McuEvent
from hvhost.wire.greeting import McuInfo

FIRST = 16  # events asked for again: as many as the MCU keeps


@dataclass(frozen=True, slots=True, kw_only=True)
class Aftermath:
    """Causes and last events as the greeting found them."""

    tag: int
    boot: int
    causes: int
    words: tuple[str, ...]
    host_rule: int
    mark: bool  # the 'energised' mark stands
    events: tuple[McuEvent, ...]


class AftermathReader:
    """Collects the events that belong to the causes of one greeting."""

    def __init__(self) -> None:
        self.ready: list[Aftermath] = []
        self._info: McuInfo | None = None
        self._events: dict[int, McuEvent] = {}
        self._answered = False

    @property
    def reading(self) -> bool:
        """Whether something is still being read."""
        return self._info is not None

    def begin(self, info: McuInfo) -> int | None:
        """A greeting: return the event number from which to ask again, None where there is nothing to read."""
        self._info, self._events, self._answered = None, {}, False
        if not info.tag or not (info.causes or info.mark or info.snapshot):
            return None
        self._info = info
        return max(1, info.event - FIRST + 1)

    def heard(self, event: McuEvent) -> None:
        """An event came, told again or new."""
        if self._info is not None and event.number <= self._info.event:
            self._events[event.number] = event

    def answered(self) -> None:
        """The MCU has answered (or will not); what it tells again comes before its next block."""
        self._answered = self._info is not None

    def block(self) -> None:
        """A block came: after the answer, this is all there is."""
        info = self._info
        if info is None or not self._answered:
            return
        self._info = None
        self.ready.append(Aftermath(
            tag=info.tag, boot=info.boot, causes=info.causes, words=told_causes(info.causes, info.rule),
            host_rule=info.rule, mark=info.mark, events=tuple(self._events[n] for n in sorted(self._events))))
        del self.ready[:-4]

    def take(self) -> list[Aftermath]:
        """Hand over what is ready."""
        ready, self.ready = self.ready, []
        return ready
