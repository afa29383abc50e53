"""The path itself: what leaves first, what time alone does, what is believed."""

from dataclasses import replace

from hypothesis import given
from hypothesis import strategies as st

from hvhost.supervisor import following
from hvhost.supervisor.core import Core
from hvhost.supervisor.states import LIVE, Permission
from hvhost.wire.frames import Block, McuEvent
from hvhost.wire.vocabulary import McuState
from tests.supervisor.lab import DEMO, Lab, fallen, shown

MARK = {b"renew": "renew", b"cut": "cut"}


class Order:
    """A journal that keeps the order of what the core did."""

    def __init__(self) -> None:
        self.told: list[str] = []

    def block(self, now_s: float, block: Block) -> None:
        """A block was kept."""
        self.told.append("block")

    def line(self, now_s: float, body: bytes) -> None:
        """A line was kept."""

    def garbled(self, now_s: float, reason: str, size: int) -> None:
        """A line was dropped."""

    def sent(self, now_s: float, data: bytes) -> None:
        """Bytes were kept as sent."""

    def command(self, now_s: float, data: object) -> None:
        """A command was taken."""

    def timer(self, now_s: float) -> None:
        """A step by time."""

    def note(self, now_s: float, data: object) -> None:
        """A conclusion."""
        self.told.append("note")


def test_a_stop_is_out_before_anything_is_kept_or_said(lab: Lab) -> None:
    """The generator yields the stop's bytes; journal and notes come after the caller has written them."""
    lab.energise().held()
    order = Order()
    lab.core.journal = order
    lab.tap = shown(fallen(0))
    written: list[list[str]] = []
    write = lab.station._write

    def keep(data: bytes) -> bytes:
        if b"\narc " in data:
            written.append(order.told.copy())
        return write(data)

    lab.station._write = keep
    order.told.clear()
    lab.until(lambda: bool(written), 1.0)
    assert "note" not in written[0]
    assert "note" in order.told


def test_renewals_come_from_judged_blocks_only(lab: Lab) -> None:
    """Time alone, commands and answers renew nothing; each renewal follows a block."""
    lab.ready()
    lab.sent.clear()
    lab.tap = lambda line: b"" if line.startswith(b"b ") else line
    for _ in range(20):
        lab.station.tick()
        lab.ask("seat.check")
    lab.pass_s(0.3)
    assert not any(b"renew" in data for _, data in lab.sent)
    lab.tap = lambda line: line
    lab.pass_s(0.3)
    assert 2 <= sum(data.count(b"renew") for _, data in lab.sent) <= 5  # at most one in an eighth of the lease


def test_a_repeated_block_renews_and_moves_nothing(lab: Lab) -> None:
    """Seen before: kept, counted, not judged twice."""
    lab.ready()
    lines: list[bytes] = []

    def twice(line: bytes) -> bytes:
        if line.startswith(b"b "):
            lines.append(line)
            return line + line
        return line

    lab.tap = twice
    lab.pass_s(1.0)
    assert lab.core.assembler is not None
    assert lab.core.assembler.counters.repeated >= len(lines) - 1
    assert sum(data.count(b"renew") for t_s, data in lab.sent if t_s > lab.now_s - 1.0) <= 17


def test_a_block_of_a_lost_session_is_not_believed(lab: Lab) -> None:
    """After the link is lost nothing of it is shown."""
    lab.ready()
    sample = lab.core.sample
    assert sample is not None
    from hvhost.supervisor.linking import lose

    lose(lab.core, lab.now_s, "test")
    following.follow(lab.core, [replace(sample, index=sample.index + 32)], lab.now_s)
    assert lab.core.sample is sample


def test_the_deadline_never_lies_far_away_while_anything_is_permitted(lab: Lab) -> None:
    """The shell is asked back within a quarter of a second."""
    lab.energise().held()
    due = lab.station.deadline()
    assert due is not None
    assert due <= lab.now_s + 0.25


MOVES = st.one_of(
    st.tuples(st.just("event"), st.sampled_from(["requested", "warning", "energised", "pausing", "resumed", "lowering",
                                                 "cut", "segment", "hold", "cause", "proven", "pressed", "void"]),
              st.integers(-2, 5), st.integers(-2, 40_000)),
    st.tuples(st.just("state"), st.sampled_from(list(McuState)), st.booleans(), st.integers(0, 3)))


@given(st.lists(MOVES, max_size=25))
def test_no_reports_of_any_mcu_lead_to_running_without_an_arm(moves: list[tuple[object, ...]]) -> None:
    """Events and states in any order, true or not: nobody armed, so nothing is ever permitted but the way down."""
    from hvhost.supervisor import hearing

    core = Core(DEMO, 0.0, lambda: 1)
    core.connect(0.0)
    for at, move in enumerate(moves, 1):
        if move[0] == "event":
            event = McuEvent(number=at, tick=at * 10, kind=str(move[1]), a=int(move[2]), b=int(move[3]))  # type: ignore[call-overload]
            hearing.mcu_event(core, event, at * 0.01)
        else:
            core.mcu_in(McuState(move[1]), at * 10, at * 0.01)  # type: ignore[arg-type]
        core.settle(at * 0.01)
        assert core.state.permission in (Permission.IDLE, Permission.LOWERING)
        assert core.state.permission not in LIVE - {Permission.LOWERING}
