"""A crowd of clients in a process of its own: instrument sockets that ask, local subscribers that read.

``python -m hvhost.speed.crowders PORT SOCKET COUNT RATE`` connects COUNT of each and obeys lines on standard input:
``go`` makes each instrument client ask RATE times a second (one question outstanding, as a script does) and each local
one subscribe; ``rest`` stops both and answers with how many answers and notifications came.
"""

import json
import select
import socket
import sys
import time

QUESTION = b"MEAS:VOLT?;CURR?;:STAT:OPER:COND?;:STAT:QUES:COND?;*ESR?\n"
READ_MAX = 1 << 16
LONGEST_S = 0.1


class Crowd:
    """All clients of one process."""

    def __init__(self, port: int, path: str, count: int, rate_hz: float) -> None:
        self.every_s, self.rate_hz = 1.0 / rate_hz, rate_hz
        self.asking = [socket.create_connection(("127.0.0.1", port)) for _ in range(count)]
        self.watching = []
        for _ in range(count):
            line = socket.socket(socket.AF_UNIX)
            line.connect(path)
            self.watching.append(line)
        self._kind = dict.fromkeys(self.asking, True) | dict.fromkeys(self.watching, False)
        self._due = dict.fromkeys(self.asking, 0.0)
        self._open: set[socket.socket] = set()
        self.going = False
        self.answers = self.notifications = 0

    def go(self) -> None:
        """Begin; the questions of all clients are spread over the interval."""
        self.going, self.answers, self.notifications = True, 0, 0
        now_s = time.monotonic()
        for number, line in enumerate(self.asking):
            self._due[line] = now_s + self.every_s * number / len(self.asking)
        self._tell("subscribe", {"rate_hz": self.rate_hz})

    def rest(self) -> None:
        """Ask no more."""
        self.going = False
        self._tell("unsubscribe", {})

    def _tell(self, method: str, params: dict[str, float]) -> None:
        text = json.dumps({"jsonrpc": "2.0", "id": 1, "method": method, "params": params}).encode() + b"\n"
        for line in self.watching:
            line.sendall(text)

    def work_once(self) -> None:
        """Ask what is due and read what came."""
        now_s = time.monotonic()
        if self.going:
            for line, due_s in self._due.items():
                if due_s <= now_s and line not in self._open:
                    line.sendall(QUESTION)
                    self._open.add(line)
                    self._due[line] = max(due_s + self.every_s, now_s)
        left_s = min(self._due.values()) - now_s if self.going else LONGEST_S
        wait_s = max(0.001, min(LONGEST_S, left_s))
        for line in select.select(list(self._kind), [], [], wait_s)[0]:
            self._read(line)

    def _read(self, line: socket.socket) -> None:
        count = line.recv(READ_MAX).count(b"\n")
        if self._kind[line]:
            self._open.discard(line)
            self.answers += count
        else:
            self.notifications += count


def main(port: int, path: str, count: int, rate_hz: float) -> None:
    """Obey until standard input ends."""
    crowd = Crowd(port, path, count, rate_hz)
    print("ready", flush=True)
    while True:
        crowd.work_once()
        if not select.select([sys.stdin], [], [], 0.0)[0]:
            continue
        word = sys.stdin.readline().strip()
        if word == "go":
            crowd.go()
            print("gone", flush=True)
        elif word == "rest":
            crowd.rest()
            print(crowd.answers, crowd.notifications, flush=True)
        else:
            return


if __name__ == "__main__":
    main(int(sys.argv[1]), sys.argv[2], int(sys.argv[3]), float(sys.argv[4]))
