"""What an MCU still knows of an earlier run, read once per greeting."""

from dataclasses import replace

from hvhost.supervisor.aftermath import FIRST, AftermathReader
from hvhost.wire.frames import McuEvent
from hvhost.wire.greeting import McuInfo
from hvhost.wire.vocabulary import Cause, ResetCause

INFO = McuInfo(
    firmware="test", protocol=1, signs="ss", v_bits=16, i_bits=16, dv_bits=16, di_bits=16, tick_hz=10_000,
    sample_ticks=10, skew_ns=0, block_pairs=32, queue=16, before_pairs=64, after_pairs=64, boot=4,
    reset=ResetCause.WATCHDOG, causes=int(Cause.HOST_RULE), rule=12, tag=0xABCD, mark=True, settings_checksum=1,
    blank=False, arm=0, event=30, tick=0, snapshot=0)


def event(number: int) -> McuEvent:
    """An event."""
    return McuEvent(number=number, tick=number, kind="cause", a=1, b=0)


def test_causes_are_ready_after_the_answer_and_the_next_block() -> None:
    """The events that come between belong to them; newer ones do not."""
    reader = AftermathReader()
    assert reader.begin(INFO) == 30 - FIRST + 1
    assert reader.reading
    reader.block()
    reader.heard(event(29))
    reader.answered()
    reader.heard(event(28))
    reader.heard(event(31))
    assert reader.take() == []
    reader.block()
    assert not reader.reading
    [found] = reader.take()
    assert [e.number for e in found.events] == [28, 29]
    assert found.words == ("host: stale",)
    assert (found.tag, found.boot, found.mark) == (0xABCD, 4, True)


def test_without_a_tag_or_anything_to_tell_nothing_is_read() -> None:
    """A fresh boot has no run."""
    reader = AftermathReader()
    assert reader.begin(replace(INFO, tag=0)) is None
    assert reader.begin(replace(INFO, causes=0, mark=False)) is None
    assert not reader.reading


def test_a_new_greeting_forgets_what_was_half_read() -> None:
    """The next session reads anew."""
    reader = AftermathReader()
    reader.begin(INFO)
    reader.heard(event(29))
    reader.begin(replace(INFO, tag=0))
    reader.answered()
    reader.block()
    assert reader.take() == []


def test_what_nobody_takes_is_bounded() -> None:
    """Four at most."""
    reader = AftermathReader()
    for _ in range(9):
        reader.begin(INFO)
        reader.answered()
        reader.block()
    assert len(reader.ready) == 4
