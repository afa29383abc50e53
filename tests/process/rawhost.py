"""A host of another make: speaks the protocol from PROTOCOL.md alone, and says whatever a scenario asks it to.

It shares no code with the host under test; the board cannot know what it is talking to.
"""

import contextlib
import random
import socket
import threading
import time
from collections.abc import Callable
from typing import Any

from tests.process.relay import sealed

SAMPLE_TICKS = 10  # of the stand-in: page 2 tells it
RENEW_S = 0.05


class RawHost:
    """One connection to a board behind ``tcp:HOST:PORT``; a thread reads, and renews by ``judged``."""

    def __init__(self, device: str, *, lease_ms: int = 500) -> None:
        host, _, port = device[4:].rpartition(":")
        self._socket = socket.create_connection((host, int(port)))
        self._socket.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        self._socket.settimeout(0.02)
        self.lease_ms = lease_ms
        self.session = 0
        self._random = random.Random(lease_ms)
        self.index = self.tick = self.state = -1  # of the last pair seen
        self.event = self.stop = self.number = self.arms = 0
        self.settings = "00000000"
        self.judged: Callable[[], int] | None = lambda: self.index
        self.answers: list[str] = []
        self._renewed_s = 0.0
        self._ending = False
        self._lock = threading.Lock()
        self._thread = threading.Thread(target=self._run, name="raw host", daemon=True)

    def __enter__(self) -> "RawHost":
        self._thread.start()
        return self

    def __exit__(self, *_: object) -> None:
        self._ending = True
        self._thread.join(10.0)
        self._socket.close()

    # ------------------------------------------------------------ lines

    def _run(self) -> None:
        rest = b""
        while not self._ending:
            try:
                data = self._socket.recv(65536)
            except TimeoutError:
                continue
            except OSError:
                return
            if not data:
                return
            *lines, rest = (rest + data).split(b"\n")
            for line in lines:
                self._line(line[:-12].decode("ascii"))

    def _line(self, body: str) -> None:
        words = body.split(" ")
        if words[0] == "b":
            self.index, self.tick = int(words[1]) + int(words[11]) - 1, int(words[2])
            self.state = int(words[5])
            self._renew()
        elif words[0] == "ev":
            self.event = max(self.event, int(words[1]))
        else:
            self.answers.append(body)

    def _renew(self) -> None:
        now_s = time.monotonic()
        if self.judged is not None and self.session and now_s - self._renewed_s >= RENEW_S:
            self._renewed_s = now_s
            self.send(f"renew {self.session:08X} {self.judged()}")

    def send(self, body: str) -> None:
        """One good line."""
        self.write(sealed(body.encode("ascii")))

    def write(self, data: bytes) -> None:
        """Any bytes."""
        with self._lock:
            self._socket.settimeout(10.0)
            self._socket.sendall(data)
            self._socket.settimeout(0.02)

    # ------------------------------------------------------------ requests

    def ask(self, verb: str, *fields: Any, seconds: float = 20.0) -> str:
        """A numbered request; returns the answer's body."""
        self.number += 1
        return self._asked(self.number, verb, " ".join([verb, str(self.number), f"{self.session:08X}",
                                                        *map(str, fields)]), seconds)

    def _asked(self, number: int, verb: str, body: str, seconds: float = 20.0) -> str:
        """Send a request, and again with the same bytes while it is not answered: a UART loses what nobody takes."""
        until_s = time.monotonic() + seconds
        while time.monotonic() < until_s:
            self.send(body)
            with contextlib.suppress(AssertionError):
                return self.wait_answer(number, verb, 0.5)
        raise AssertionError(f"no answer to {body}")

    def wait_answer(self, number: int, verb: str, seconds: float = 20.0) -> str:
        """The newest answer to this request."""
        until_s = time.monotonic() + seconds
        while time.monotonic() < until_s:
            for body in reversed(self.answers):
                if body.split(" ")[1:3] == [str(number), verb]:
                    return body
            time.sleep(0.005)
        raise AssertionError(f"no answer to {verb} {number}")

    def hello(self) -> None:
        """Open another session and read what an arm needs."""
        self.session = self._random.randrange(1, 1 << 32)
        number = self.session | 1 << 31
        answer = self._asked(number, "hello", f"hello {number} {self.session:08X} 1 {self.lease_ms}")
        assert answer.startswith("ok"), answer
        self.answers.clear()  # what comes now belongs to this session
        self.number = 0
        page = dict(word.split("=") for word in self.ask("info", 3).split(" ")[4:])
        self.settings, self.arms = page["settings"], int(page["arm"])
        self.event = max(self.event, int(page["event"]))
        causes = page["causes"]
        self._wait_state(0)
        until_s = time.monotonic() + 20.0
        while causes != "00000000" and not (answer := self.ask("reset", causes, 0)).startswith("ok"):
            # the interlock must have been closed for 100 ms
            assert answer.endswith(" interlock"), answer
            assert time.monotonic() < until_s, answer

    def _wait_state(self, state: int, seconds: float = 30.0) -> None:
        until_s = time.monotonic() + seconds
        while self.state != state:
            assert time.monotonic() < until_s, f"state {self.state}, waited for {state}"
            time.sleep(0.005)

    def arm(self, *options: str) -> str:
        """Ask for the next arm with the newest event seen; what crosses it is tried again."""
        for _ in range(40):
            answer = self.ask("arm", self.arms + 1, "0000ABCD", self.settings, self.event, *options)
            if not answer.endswith((" event", " lease")):  # no renewal has reached it yet
                break
            time.sleep(0.05)
        if answer.startswith("ok"):
            self.arms += 1
        return answer

    def energise(self, press: Callable[[], object], *segments: tuple[int, int, int]) -> None:
        """Arm, have the input pressed, queue segments in the warning, and wait until energised."""
        answer = self.arm()
        assert answer.startswith("ok"), answer
        press()
        self._wait_state(3)
        for segment in segments:
            answer = self.ask("seg", *segment)
            assert answer.startswith("ok"), answer
        self._wait_state(4)

    def cut(self, rule: int = 0) -> bytes:
        """A cut's bytes with its leading LF, not sent yet."""
        self.stop += 1
        return b"\n" + sealed(f"cut {self.stop} {rule}".encode("ascii"))
