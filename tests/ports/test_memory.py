"""Station and board joined in memory: bytes pass at the tick at which they are ready, and time is virtual."""

from hvhost.ports.memory import LOOK_EVERY_S, MemoryLine
from hvhost.words.clocks import VirtualClock


class Board:
    """Echoes at its next sample and keeps what it was fed, with the ticks."""

    def __init__(self) -> None:
        self.tick = 0
        self.fed: list[tuple[int, bytes]] = []
        self.out = b""

    def advance_to(self, tick: int) -> None:
        """Let time pass."""
        self.tick = tick

    def feed(self, data: bytes) -> None:
        """Take bytes."""
        self.fed.append((self.tick, data))
        self.out += data

    def take_output(self) -> bytes:
        """Echo."""
        out, self.out = self.out, b""
        return out


class Station:
    """Counts what it is fed and when its timer was due."""

    def __init__(self, clock: VirtualClock) -> None:
        self.clock = clock
        self.got: list[tuple[float, bytes]] = []
        self.due: float | None = 0.05
        self.ticked: list[float] = []

    def feed(self, data: bytes) -> None:
        """Bytes of the board."""
        self.got.append((self.clock.now_s(), data))

    def tick(self) -> None:
        """The timer."""
        self.ticked.append(self.clock.now_s())
        self.due = None

    def deadline(self) -> float | None:
        """When the timer is due."""
        return self.due


def joined() -> tuple[MemoryLine, Board, Station]:
    """A line at 10 kHz with ten ticks a sample."""
    clock = VirtualClock(utc_origin_ns=0)
    board, station = Board(), Station(clock)
    line = MemoryLine(board, clock, 10_000, 10)
    line.station = station  # type: ignore[assignment]
    return line, board, station


def test_bytes_reach_the_board_before_its_next_sample() -> None:
    """What the host writes now is fed before the next step, and nothing is left over."""
    line, board, station = joined()
    assert line.write(b"abc") == b""
    line.write(b"def")
    line.run(lambda: False, 0.001)
    assert board.fed == [(0, b"abcdef")]
    assert station.got == [(0.001, b"abcdef")]


def test_time_is_virtual_and_bounded() -> None:
    """A second of samples passes whatever the wall clock does; False says that it was not enough."""
    line, board, _ = joined()
    assert not line.run(lambda: False, 1.0)
    assert line.clock.now_s() == 1.0
    assert board.tick == 10_000


def test_the_timer_fires_at_its_deadline() -> None:
    """The station's timer is called at the first step that is not before it."""
    line, _, station = joined()
    line.run(lambda: False, 0.2)
    assert len(station.ticked) == 1
    assert 0.05 <= station.ticked[0] < 0.0511


def test_it_ends_when_the_look_says_so() -> None:
    """Whoever drives looks now and then; True ends the run."""
    line, _, _ = joined()
    looks = []

    def look() -> bool:
        looks.append(line.clock.now_s())
        return len(looks) > 2

    assert line.run(look, 100.0)
    assert line.clock.now_s() <= 3 * LOOK_EVERY_S
