"""The far end of a pseudo-terminal in a process of its own: pours bytes, or asks and times the answer.

``python -m hvhost.speed.child SLAVE FILE`` obeys commands of eight bytes and more on standard input and answers on
standard output:

``pour A B``   write the bytes A to B of FILE; answers ``done``
``ask L``      write the L bytes that follow on standard input to the terminal, wait for the first byte that comes
               back, answer with the nanoseconds between
``fifo N``     take the real-time priority N (0: the ordinary one); answers ``done`` or ``no``
"""

import contextlib
import gc
import os
import pty
import select
import subprocess
import sys
import termios
import time
import tty
from collections.abc import Iterator
from pathlib import Path

ANSWER_S = 5.0


class Device:
    """The child and our end of the terminal (``fd``); leaving the context ends it."""

    def __init__(self, folder: Path, data: bytes = b"") -> None:
        self.fd, slave = pty.openpty()
        tty.setraw(self.fd)
        tty.setraw(slave)
        file = folder / "poured"
        file.write_bytes(data)
        self._child = subprocess.Popen(
            [sys.executable, "-m", "hvhost.speed.child", os.ttyname(slave), str(file)], stdin=subprocess.PIPE,
            stdout=subprocess.PIPE)
        self._slave = slave
        assert self._child.stdin is not None
        assert self._child.stdout is not None
        self._to, self._from = self._child.stdin, self._child.stdout
        self.await_done()  # it has opened its end

    def __enter__(self) -> "Device":
        return self

    def __exit__(self, *_: object) -> None:
        with contextlib.suppress(OSError):
            self._to.close()
        if self._child.poll() is None:
            self._child.terminate()
        self._child.wait()
        self._from.close()
        os.close(self._slave)
        os.close(self.fd)

    @property
    def process(self) -> int:
        """The child's process number."""
        return self._child.pid

    @property
    def answers(self) -> int:
        """The descriptor on which answers come."""
        return self._from.fileno()

    def pour(self, begin: int, end: int) -> None:
        """Begin to write these bytes."""
        self._send(f"pour {begin} {end}\n".encode())

    def ask(self, line: bytes) -> None:
        """Write this line and time the answer."""
        self._send(f"ask {len(line)}\n".encode() + line)

    def fifo(self, priority: int) -> bool:
        """Take a real-time priority; False where that is not permitted."""
        self._send(f"fifo {priority}\n".encode())
        return self.answer() == "done"

    def answer(self) -> str:
        """Wait for the next answer."""
        return self._from.readline().decode().strip()

    def await_done(self) -> None:
        """Wait for 'done'."""
        if self.answer() != "done":
            raise OSError("the device of the measurement ended")

    def _send(self, data: bytes) -> None:
        self._to.write(data)
        self._to.flush()


@contextlib.contextmanager
def as_a_daemon(device: Device | None = None) -> Iterator[None]:
    """This process as the daemon sets itself up; and, where there are two cores, on another one than the device.

    Which cores the two ends get by chance decides by a factor of two what passes between them.
    """
    from hvhost.daemon import SWITCH_S  # not for the child, which must start fast

    cores, interval = os.sched_getaffinity(0), sys.getswitchinterval()
    gc.collect()
    gc.freeze()
    sys.setswitchinterval(SWITCH_S)
    try:
        if device is not None and len(cores) > 1:
            own, far = sorted(cores)[:2]
            os.sched_setaffinity(0, {own})
            os.sched_setaffinity(device.process, {far})
        yield
    finally:
        os.sched_setaffinity(0, cores)
        sys.setswitchinterval(interval)
        gc.unfreeze()


def set_fifo(priority: int) -> bool:
    """Take SCHED_FIFO with this priority, or (0) the ordinary scheduler; False where that is not permitted."""
    policy = os.SCHED_FIFO if priority else os.SCHED_OTHER
    try:
        os.sched_setscheduler(0, policy, os.sched_param(priority))
    except OSError:
        return False
    return True


def _ask(fd: int, line: bytes) -> int:
    with contextlib.suppress(termios.error):
        termios.tcflush(fd, termios.TCIFLUSH)  # what is left of the answer before
    begun = time.perf_counter_ns()
    os.write(fd, line)
    ready, _, _ = select.select([fd], [], [], ANSWER_S)
    seconds = time.perf_counter_ns() - begun
    if ready:
        os.read(fd, 4096)
    return seconds


def main(device: str, file: str) -> None:
    """Obey until standard input ends."""
    fd = os.open(device, os.O_RDWR | os.O_NOCTTY)
    data = memoryview(Path(file).read_bytes())
    commands, answers = sys.stdin.buffer, sys.stdout
    print("done", file=answers, flush=True)
    while line := commands.readline():
        verb, *words = line.decode().split()
        if verb == "pour":
            begin, end = map(int, words)
            while begin < end:
                begin += os.write(fd, data[begin : min(end, begin + 4096)])
            print("done", file=answers, flush=True)
        elif verb == "ask":
            print(_ask(fd, commands.read(int(words[0]))), file=answers, flush=True)
        elif verb == "fifo":
            print("done" if set_fifo(int(words[0])) else "no", file=answers, flush=True)


if __name__ == "__main__":
    main(sys.argv[1], sys.argv[2])
