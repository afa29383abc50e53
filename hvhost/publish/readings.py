"""Readings for scripts: every sample, or min, mean and max of stretches, as base64 arrays in bounded portions.

Theory.  The read callback only appends the judged block to a bounded deque; ten times a second the blocks that came
are turned into lines, once for all clients that asked for the same ``every``.  Each client has a bounded backlog of
lines beside its socket: what it does not read in time goes, oldest first, and is counted in samples.  So a client
that is slow, or gone, costs a bounded amount of memory and nothing else (S12).

A line is a JSON-RPC notification ``readings``.  Its samples are consecutive; ``index`` and ``tick`` are of the first,
unwrapped.  ``missing`` says how many samples the link lost before it, ``dropped`` how many this client was not sent
since it asked.  Arrays are little-endian 32-bit floats, oriented volts and amps (positive in the bench's polarity).

Nothing here knows a loop or a socket.
"""

from base64 import b64encode
from collections import deque
from collections.abc import Callable, Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from hvhost.samples.blocks import Flags, SampleBlock
from hvhost.supervisor.core import Core
from hvhost.wire.vocabulary import McuState

BLOCKS_KEPT = 2_048  # blocks waiting to be sent: 6 s of the fastest stream, 64 s at 1,000 pairs a second
EVERY_MOST = 100_000  # samples in one stretch
POINTS_MOST = 4_096  # points in one line: 16 KiB an array
BACKLOG_MOST = 1_048_576  # bytes of lines waiting for one client
ASKING_MOST = 8  # different stretches asked for at once
SHOWN_FLAGS = ((Flags.LIMIT_V, "voltage at converter limit"), (Flags.LIMIT_I, "current at converter limit"),
               (Flags.REVERSED_V, "voltage reversed"), (Flags.REVERSED_I, "current reversed"),
               (Flags.MISSED, "missed conversions"))

Codes = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class Figures:
    """How oriented codes become volts and amps, and ticks become UTC, as it holds now."""

    v_zero: float
    v_gain: float
    i_zero: float
    i_gain: float
    tick_hz: float
    utc_ns: Callable[[int], int]  # UTC of an unwrapped tick


def figures_of(core: Core, utc_of: Callable[[float], int]) -> Figures | None:
    """The figures of a core's session; ``utc_of`` gives the UTC of a monotonic time; None before the greeting."""
    assembler = core.assembler
    if assembler is None:
        return None
    clock = assembler.clock
    return Figures(v_zero=core.volts(0), v_gain=core.volts(1) - core.volts(0), i_zero=core.amps(0),
                   i_gain=core.amps(1) - core.amps(0), tick_hz=core.tick_hz,
                   utc_ns=lambda tick: utc_of(clock.host_s(tick)))


@dataclass(frozen=True, slots=True)
class Portion:
    """One line for every client of a stretch: what follows ``dropped`` in it, and how many samples it stands for."""

    tail: bytes
    samples: int

    def line(self, dropped: int) -> bytes:
        """The whole notification for a client that was not sent ``dropped`` samples."""
        return b'{"jsonrpc":"2.0","method":"readings","params":{"dropped":%d,%s}}\n' % (dropped, self.tail)


class Backlog:
    """The portions that one client has not been sent yet; the oldest go where there are too many bytes."""

    def __init__(self, every: int, limit: int = BACKLOG_MOST) -> None:
        self.every, self._limit = every, limit
        self._waiting: deque[Portion] = deque()
        self._bytes = 0
        self.dropped = 0  # samples

    def put(self, portion: Portion) -> int:
        """Append a portion; returns how many portions had to go for it."""
        self._waiting.append(portion)
        self._bytes += len(portion.tail)
        gone = 0
        while self._bytes > self._limit and len(self._waiting) > 1:
            self._bytes -= len(self._waiting[0].tail)
            self.dropped += self._waiting.popleft().samples
            gone += 1
        return gone

    def take(self) -> bytes | None:
        """The oldest portion's line, None where nothing waits."""
        if not self._waiting:
            return None
        portion = self._waiting.popleft()
        self._bytes -= len(portion.tail)
        return portion.line(self.dropped)

    @property
    def waiting_bytes(self) -> int:
        """Bytes that wait."""
        return self._bytes


class ReadingsFeed:
    """Takes judged blocks, gives portions to whoever asked."""

    def __init__(self, figures: Callable[[], Figures | None], kept: int = BLOCKS_KEPT) -> None:
        self._figures = figures
        self._blocks: deque[SampleBlock] = deque(maxlen=kept)
        self._stretches: dict[int, Stretch] = {}
        self._backlogs: list[Backlog] = []
        self._overrun = 0  # samples that went before they could be encoded

    def take(self, sample: SampleBlock) -> None:
        """Keep one judged block; nothing where nobody asked."""
        if not self._backlogs:
            return
        blocks = self._blocks
        if len(blocks) == blocks.maxlen:
            self._overrun += blocks[0].pairs
        blocks.append(sample)

    def add(self, backlog: Backlog) -> bool:
        """Begin to fill a client's backlog; False where too many different stretches are asked for already."""
        if backlog.every not in self._stretches and len(self._stretches) >= ASKING_MOST:
            return False
        self._stretches.setdefault(backlog.every, Stretch(backlog.every))
        self._backlogs.append(backlog)
        return True

    def remove(self, backlog: Backlog) -> None:
        """Fill it no longer."""
        if backlog in self._backlogs:
            self._backlogs.remove(backlog)
        if all(one.every != backlog.every for one in self._backlogs):
            self._stretches.pop(backlog.every, None)
        if not self._backlogs:
            self._blocks.clear()

    def spread(self) -> int:
        """Encode what came and put it into every backlog; returns how many portions had to go."""
        figures = self._figures()
        blocks = tuple(self._blocks)
        self._blocks.clear()
        if figures is None or not self._backlogs:
            return 0
        overrun, self._overrun = self._overrun, 0
        for backlog in self._backlogs:
            backlog.dropped += overrun
        portions = {every: tuple(stretch.portions(blocks, figures)) for every, stretch in self._stretches.items()}
        gone = sum(backlog.put(portion) for backlog in self._backlogs for portion in portions[backlog.every])
        return gone + (len(self._backlogs) if overrun else 0)


class Stretch:
    """Turns blocks into portions of one ``every``; what does not fill a stretch yet waits for the next block."""

    def __init__(self, every: int) -> None:
        self.every = every
        self._held: list[SampleBlock] = []  # blocks of which samples from `_from` on are not sent
        self._from = 0
        self._missing = 0

    def portions(self, blocks: tuple[SampleBlock, ...], figures: Figures) -> Iterator[Portion]:
        """Yield the portions of these blocks, each of consecutive samples in one state."""
        for block in blocks:
            if self._held and not self._continues(block):
                yield from self._emit(figures, whole=False)
                self._held = []
            if not self._held:
                self._from = 0
                self._missing += block.gap
            self._held.append(block)
        yield from self._emit(figures, whole=True)

    def _continues(self, block: SampleBlock) -> bool:
        last = self._held[-1]
        return (block.gap == 0 and block.index == last.last_index + 1 and block.state == last.state
                and block.latched == last.latched)

    def _emit(self, figures: Figures, *, whole: bool) -> Iterator[Portion]:
        """Send what is held; with ``whole``, only full stretches (they end where the index divides by ``every``)."""
        if not self._held:
            return
        first = self._held[0].index + self._from
        end = self._held[-1].last_index + 1
        upto = end - end % self.every if whole else end
        if upto <= first:
            return
        v = _joined(self._held, "v")[self._from:]
        i = _joined(self._held, "i")[self._from:]
        bounds = _bounds(first, upto, self.every)
        for at in range(0, len(bounds) - 1, POINTS_MOST):
            part = bounds[at : at + POINTS_MOST + 1]
            yield self._portion(figures, first, part, v, i)
            self._missing = 0
        self._keep(upto)

    def _keep(self, upto: int) -> None:
        """Hold on to the samples from index ``upto`` on."""
        self._held = [block for block in self._held if block.last_index >= upto]
        self._from = upto - self._held[0].index if self._held else 0

    def _portion(self, figures: Figures, first: int, bounds: NDArray[np.int64], v: Codes, i: Codes) -> Portion:
        a, b = int(bounds[0] - first), int(bounds[-1] - first)
        held, head = self._held, self._held[0]
        tick = head.tick + (int(bounds[0]) - head.index) * head.sample_ticks
        volts, amps = figures.v_zero + figures.v_gain * v[a:b], figures.i_zero + figures.i_gain * i[a:b]
        flags = 0
        for block in held:
            flags |= int(block.flags)
        words = ",".join(f'"{word}"' for flag, word in SHOWN_FLAGS if flags & flag)
        state = McuState(head.state).name.lower() if head.state in set(McuState) else "unknown"
        fields = [
            f'"index":{bounds[0]},"tick":{tick},"every":{self.every},"points":{len(bounds) - 1}',
            f'"sample_s":{head.sample_ticks / figures.tick_hz!r},"utc_ns":{figures.utc_ns(tick)}',
            f'"missing":{self._missing},"state":"{state}","latched":{"true" if head.latched else "false"}',
            f'"flags":[{words}]', *_arrays(volts, amps, bounds - bounds[0], self.every)]
        return Portion(",".join(fields).encode("ascii"), b - a)


def _joined(blocks: list[SampleBlock], name: str) -> Codes:
    codes: list[int] = []
    for block in blocks:
        codes += getattr(block, name)
    return np.array(codes, dtype=np.float64)


def _bounds(first: int, end: int, every: int) -> NDArray[np.int64]:
    """Indices at which stretches begin, and the end: first, the multiples of ``every`` between, end."""
    inner = np.arange(first - first % every + every, end, every, dtype=np.int64)
    return np.concatenate((np.array([first], dtype=np.int64), inner, np.array([end], dtype=np.int64)))


def _arrays(volts: Codes, amps: Codes, bounds: NDArray[np.int64], every: int) -> Iterator[str]:
    if every == 1:
        yield f'"volts":"{_text(volts)}"'
        yield f'"amps":"{_text(amps)}"'
        return
    begins, counts = bounds[:-1], np.diff(bounds)
    for name, values in (("volts", volts), ("amps", amps)):
        yield f'"{name}":"{_text(np.add.reduceat(values, begins) / counts)}"'
        yield f'"{name}_min":"{_text(np.minimum.reduceat(values, begins))}"'
        yield f'"{name}_max":"{_text(np.maximum.reduceat(values, begins))}"'


def _text(values: Codes) -> str:
    return b64encode(values.astype("<f4").tobytes()).decode("ascii")
