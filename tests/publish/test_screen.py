"""The screen's process: keys, resizing, a daemon that goes away, over a real pseudo-terminal."""

import fcntl
import io
import os
import pty
import signal
import struct
import subprocess
import sys
import termios
import threading
import time
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import pyte
import pytest
from rich.console import Console

from hvhost.publish.keys import Act
from hvhost.publish.screen import GONE, Acts, needs_ascii, show_lines, show_once
from hvhost.publish.snapshot import Snapshot
from hvhost.publish.stopkeys import Stopper
from hvhost.words.errors import CannotConnect
from tests.pictures.states import IDLE, RUNNING, STATES
from tests.publish.serving import FakeBench, served

PATIENCE_S = 40.0  # a loaded machine may take long to start an interpreter; nothing is judged by time
WATCH = [sys.executable, "-c", "import sys; from hvhost.cli.watch import run; sys.exit(run(sys.argv[1:]))"]


class Terminal:
    """A terminal of a given size with a program in it, read into a screen buffer by an emulator."""

    def __init__(self, arguments: list[str], columns: int, rows: int) -> None:
        self.screen = pyte.Screen(columns, rows)
        self._stream = pyte.ByteStream(self.screen)
        self._ours, theirs = pty.openpty()
        self.resize(columns, rows)
        self.program = subprocess.Popen([*WATCH, *arguments], stdin=theirs, stdout=theirs, stderr=theirs,
                                        env={**os.environ, "TERM": "xterm-256color"}, start_new_session=True)
        os.close(theirs)

    def resize(self, columns: int, rows: int) -> None:
        """Change the terminal's size, as a window manager does."""
        self.screen.resize(rows, columns)
        fcntl.ioctl(self._ours, termios.TIOCSWINSZ, struct.pack("HHHH", rows, columns, 0, 0))

    def press(self, keys: bytes) -> None:
        """Type."""
        os.write(self._ours, keys)

    def until(self, wanted: Callable[[str], bool]) -> str:
        """Feed the emulator until its picture is as wanted; return the picture."""
        until_s = time.monotonic() + PATIENCE_S
        while time.monotonic() < until_s:
            text = "\n".join(self.screen.display)
            if wanted(text):
                return text
            try:
                self._stream.feed(os.read(self._ours, 65_536))
            except OSError:
                break
        raise AssertionError("\n".join(self.screen.display))

    def close(self) -> int:
        """End the program and return its exit code."""
        self.program.terminate()
        code = self.program.wait(PATIENCE_S)
        os.close(self._ours)
        return code


def keep_publishing(bench: FakeBench, end: threading.Event, shown: Snapshot = RUNNING) -> None:
    """Publish a bench until told to end."""
    seq = 0
    while not end.is_set():
        seq += 1
        now_s = time.monotonic()
        moved = now_s - shown.now_s
        trend = tuple(one._replace(t_s=one.t_s + moved) for one in shown.trend)
        bench.publish(replace(shown, seq=seq, now_s=now_s, utc_ns=time.time_ns(), trend=trend, recent=trend))
        end.wait(0.05)


def test_the_screen_at_work(tmp_path: Path) -> None:
    """Drawn at 80x24, drawn anew at each other size, keys lower and cut without the seat, a lost daemon is told."""
    end = threading.Event()
    with served(tmp_path) as bench:
        publisher = threading.Thread(target=keep_publishing, args=(bench, end))
        publisher.start()
        terminal = Terminal(["--socket", bench.path], 80, 24)
        try:
            small = terminal.until(lambda text: "SPACE/c: cut at once" in text)
            assert "RUNNING: HOLD" in small
            terminal.resize(120, 40)
            terminal.until(lambda text: "q: leave, run goes on" in text.split("\n")[39])
            terminal.press(b"l")
            terminal.until(lambda text: "lower sent by this key: lowering" in text)
            terminal.press(b"t")
            terminal.until(lambda text: "last 1:00" in text)
            terminal.press(b"b")
            terminal.until(lambda text: "b: bell silent" in text)
            terminal.resize(200, 60)
            terminal.until(lambda text: "q: leave (what runs goes on)" in text.split("\n")[59])
            terminal.resize(60, 15)
            terminal.until(lambda text: "SPACE: cut  l: lower" in text.split("\n")[14])
            terminal.resize(80, 24)
            terminal.press(b"\x1b[A ")
            terminal.until(lambda text: "cut sent by this key: cut 1 sent" in text)
            assert [method for method, _ in bench.asked] == ["lower", "cut"]
        finally:
            end.set()
            publisher.join()
    terminal.until(lambda text: "DAEMON GONE" in text and "KEYS CANNOT STOP NOW" in text)
    terminal.press(b"q")
    terminal.until(lambda text: "left the view; what runs goes on" in text)
    assert terminal.program.wait(PATIENCE_S) == 0
    terminal.close()


def test_keys_stop_though_the_terminal_takes_no_output(tmp_path: Path) -> None:
    """S7: a terminal that nobody reads blocks the drawing; the cut key still cuts."""
    end, cut = threading.Event(), threading.Event()
    with served(tmp_path) as bench:
        bench.on_call = lambda method: cut.set() if method == "cut" else None
        publisher = threading.Thread(target=keep_publishing, args=(bench, end))
        publisher.start()
        terminal = Terminal(["--socket", bench.path], 200, 60)
        try:
            terminal.until(lambda text: "SPACE or c" in text)
            for _ in range(200):  # nothing is read from here on: the pseudo-terminal's few kilobytes fill up
                bench.publish(replace(RUNNING, seq=1, now_s=time.monotonic(), set_volts=time.monotonic() % 1e3))
            terminal.press(b" ")
            assert cut.wait(PATIENCE_S)
        finally:
            end.set()
            publisher.join()
            terminal.program.send_signal(signal.SIGKILL)
            terminal.close()


def test_a_terminal_that_takes_no_output_can_be_left(tmp_path: Path) -> None:
    """Its modes are restored without waiting for output that nobody takes; a cut pressed meanwhile went out."""
    end, cut = threading.Event(), threading.Event()
    with served(tmp_path) as bench:
        bench.on_call = lambda method: cut.set() if method == "cut" else None
        publisher = threading.Thread(target=keep_publishing, args=(bench, end))
        publisher.start()
        terminal = Terminal(["--socket", bench.path], 120, 40)
        try:
            terminal.until(lambda text: "q: leave" in text)
            terminal.press(b"\x13 ")  # Ctrl-S is a key like any other here: it freezes nothing
            assert cut.wait(PATIENCE_S)
            terminal.until(lambda text: "cut sent by this key: cut 1 sent" in text)
            terminal.press(b"q")
            terminal.until(lambda text: "left the view" in text)
            assert terminal.program.wait(PATIENCE_S) == 0
        finally:
            end.set()
            publisher.join()
            terminal.close()


def test_the_display_beside_the_arm_input(tmp_path: Path) -> None:
    """``--bench-display`` shows the open request, and its keys stop like any view's."""
    with served(tmp_path) as bench:
        end = threading.Event()
        publisher = threading.Thread(target=keep_publishing, args=(bench, end, STATES["requested"][0]))
        publisher.start()
        terminal = Terminal(["--socket", bench.path, "--bench-display", "--no-bell", "--ascii"], 80, 24)
        try:
            text = terminal.until(lambda text: "REQUEST TO ENERGISE" in text and "CANNOT ARM" in text)
            assert "asked by bob (pid 4211)" in text
            assert "THIS DISPLAY CANNOT ARM" in text
            assert text.isascii()
            terminal.press(b"c")
            while not bench.asked:
                time.sleep(0.001)
            assert bench.asked[0][0] == "cut"
        finally:
            end.set()
            publisher.join()
            terminal.close()


class Encoded(io.StringIO):
    """A file of a stated encoding."""

    encoding = "latin-1"


def test_a_terminal_without_unicode_is_asked_for(monkeypatch: pytest.MonkeyPatch) -> None:
    """Another encoding than UTF-8, or a console without braille, gets ASCII."""
    monkeypatch.setenv("TERM", "xterm-256color")
    assert needs_ascii(Console(file=Encoded()))
    modern = Encoded()
    modern.encoding = "utf-8"
    assert not needs_ascii(Console(file=modern))
    monkeypatch.setenv("TERM", "linux")
    assert needs_ascii(Console(file=modern))


class FakeStopper(Stopper):
    """A stopper that only keeps what was pressed."""

    def __init__(self) -> None:
        super().__init__("")
        self.pressed: list[str] = []

    def press(self, verb: str, now_s: float) -> None:
        """Keep the verb."""
        self.pressed.append(verb)


def test_ctrl_c_lowers_first_and_then_cuts_where_it_stops() -> None:
    """In the screen of a running command the first Ctrl-C lowers, the second cuts; neither leaves."""
    stopper = FakeStopper()
    acts = Acts(stopper, True, lambda: 0.0)
    acts.act(Act.INTERRUPT)
    acts.act(Act.INTERRUPT)
    assert stopper.pressed == ["lower", "cut"]
    assert acts.taken() == []


def test_ctrl_c_leaves_a_mere_view() -> None:
    """A view is left by Ctrl-C as by q, and stops nothing."""
    stopper = FakeStopper()
    acts = Acts(stopper, False, lambda: 0.0)
    acts.act(Act.INTERRUPT)
    assert acts.taken() == [Act.INTERRUPT]
    acts.act(Act.PLOT)
    acts.act(Act.LEAVE)
    assert acts.taken() == [Act.PLOT, Act.LEAVE]
    assert acts.taken() == []
    assert stopper.pressed == []


def test_once_prints_the_status(tmp_path: Path) -> None:
    """A script gets the present status and an end."""
    out, end = io.StringIO(), threading.Event()
    with served(tmp_path) as bench:
        publisher = threading.Thread(target=keep_publishing, args=(bench, end))
        publisher.start()
        try:
            show_once(bench.path, out)
        finally:
            end.set()
            publisher.join()
    assert "RUNNING: HOLD; voltage present" in out.getvalue()
    assert "this view cannot stop" in out.getvalue()


def test_lines_end_when_told_or_when_the_daemon_is_gone(tmp_path: Path) -> None:
    """Lines say first that they cannot stop, and last that the output is unknown where the daemon went away."""
    out, end = io.StringIO(), threading.Event()
    with served(tmp_path) as bench:
        publisher = threading.Thread(target=keep_publishing, args=(bench, end))
        publisher.start()
        try:
            assert show_lines(bench.path, out, until=lambda snapshot: snapshot.seq > 3)
        finally:
            end.set()
            publisher.join()
    assert out.getvalue().startswith("this view cannot stop")
    gone = io.StringIO()
    with served(tmp_path) as bench:
        bench.publish(IDLE)
        viewer = threading.Thread(target=lambda: results.append(show_lines(bench.path, gone)))
        results: list[bool] = []
        viewer.start()
        while bench.server is None or bench.server.view().clients == 0:
            time.sleep(0.001)
    viewer.join(PATIENCE_S)
    assert results == [False]
    assert gone.getvalue().rstrip().endswith(GONE)


def test_a_silent_daemon_is_told(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A daemon that never publishes does not keep the view waiting for ever."""
    monkeypatch.setattr("hvhost.publish.screen.FIRST_S", 0.0)
    with served(tmp_path) as bench, pytest.raises(CannotConnect, match="first snapshot"):
        show_once(bench.path, io.StringIO())
