"""A stand-in on a pseudo-terminal in a thread of this process: it notes when a cut arrives, and can be pressed."""

import contextlib
import os
import select
import threading
import time
import tty
from collections.abc import Callable
from pathlib import Path

from hvhost.bench.file import load_bench
from hvhost.speed.scene import PRESS_S, SPECIMEN
from hvhost.standin.bench import StandIn, config_of
from hvhost.standin.board import McuConfig
from hvhost.standin.eeprom import Eeprom
from hvhost.standin.params import changed, demo
from hvhost.wire.vocabulary import McuState

STEP_S = 0.002
STALL_S = 0.1  # further behind than this the bench's time stands still
CUT = b"cut "


class Board:
    """Runs in real time while the context is open; ``device`` is what a daemon opens."""

    def __init__(self, bench: Path, config: McuConfig | None = None) -> None:
        plant = changed(demo(), [SPECIMEN])
        self.config = config or config_of(plant)
        self._standin = StandIn(plant, 1, eeprom=Eeprom(load_bench(bench).settings()), config=self.config)
        self._master, self._slave = os.openpty()
        tty.setraw(self._slave)
        os.set_blocking(self._master, False)
        self.device = os.ttyname(self._slave)
        self.cuts = 0
        self.dropped = 0
        self._cut_at = 0.0
        self._acts: list[Callable[[], None]] = []
        self._stop = threading.Event()
        self._cut = threading.Condition()
        self._thread = threading.Thread(target=self._run, name="board", daemon=True)

    def __enter__(self) -> "Board":
        self._thread.start()
        return self

    def __exit__(self, *_: object) -> None:
        self._stop.set()
        self._thread.join()
        os.close(self._master)
        os.close(self._slave)

    def press(self) -> None:
        """Press the arm input."""
        self._acts.append(lambda: self._standin.plant.press(PRESS_S))

    def wait_off(self, longest_s: float = 30.0) -> None:
        """Wait until the MCU is off."""
        until = time.monotonic() + longest_s
        while self._standin.mcu.state is not McuState.OFF and time.monotonic() < until:
            time.sleep(STEP_S)

    def wait_cut(self, before: int, longest_s: float) -> float | None:
        """When the first cut after the ``before``-th arrived, None where none does."""
        with self._cut:
            return self._cut_at if self._cut.wait_for(lambda: self.cuts > before, longest_s) else None

    def _run(self) -> None:
        tick_hz, ahead_s, last_s = self.config.tick_hz, 0.0, time.monotonic()
        while not self._stop.is_set():
            ready, _, _ = select.select([self._master], [], [], STEP_S)
            data = self._read() if ready else b""
            now_s = time.monotonic()
            ahead_s += min(now_s - last_s, STALL_S)
            last_s = now_s
            while self._acts:
                self._acts.pop(0)()
            self._standin.advance_to(int(ahead_s * tick_hz))
            if data:
                self._standin.feed(data)
            if out := self._standin.take_output():
                with contextlib.suppress(BlockingIOError):
                    self.dropped -= os.write(self._master, out)
                self.dropped += len(out)

    def _read(self) -> bytes:
        try:
            data = os.read(self._master, 4096)
        except OSError:
            return b""
        if CUT in data:
            with self._cut:
                self._cut_at = time.perf_counter()
                self.cuts += data.count(CUT)
                self._cut.notify_all()
        return data
