"""The crowd itself: asks as fast as it is told to, reads, and says how much came."""

import json
import socket
import threading
import time
from pathlib import Path

from hvhost.speed.crowders import QUESTION, Crowd


def test_each_client_has_one_question_open_and_counts_what_came(tmp_path: Path) -> None:
    """Two clients of each kind beside two servers that answer; at rest nothing more is asked."""
    questions: list[bytes] = []
    asked: list[str] = []
    with socket.create_server(("127.0.0.1", 0)) as instrument, socket.socket(socket.AF_UNIX) as local:
        local.bind(str(tmp_path / "c.sock"))
        local.listen()

        def answer(line: socket.socket) -> None:
            with line:
                while data := line.recv(4096):
                    questions.append(data)
                    line.sendall(b"1;2;3\n")

        def notify(line: socket.socket) -> None:
            with line:
                while data := line.recv(4096):
                    asked.extend(json.loads(text)["method"] for text in data.splitlines())
                    line.sendall(b"{}\n")

        crowd = Crowd(instrument.getsockname()[1], str(tmp_path / "c.sock"), 2, 100.0)
        threads = [threading.Thread(target=serve, args=(server.accept()[0],), daemon=True)
                   for server, serve in ((instrument, answer), (instrument, answer), (local, notify), (local, notify))]
        for thread in threads:
            thread.start()
        crowd.go()
        until_s = time.monotonic() + 20.0
        while (crowd.answers < 20 or crowd.notifications < 2) and time.monotonic() < until_s:
            crowd.work_once()
        crowd.rest()
        assert crowd.answers >= 20
        assert set(questions) == {QUESTION}
        for line in (*crowd.asking, *crowd.watching):
            line.shutdown(socket.SHUT_WR)
        for thread in threads:
            thread.join(10.0)
        for line in (*crowd.asking, *crowd.watching):
            line.close()
    assert sorted(asked) == ["subscribe"] * 2 + ["unsubscribe"] * 2
