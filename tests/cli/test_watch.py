"""``hvhost watch``: what its options choose, and how it ends."""

import os
import subprocess
import sys
import threading
import time
from dataclasses import replace
from pathlib import Path

import pytest

from hvhost.cli import exits, watch
from tests.pictures.states import RUNNING
from tests.publish.serving import served


def test_no_daemon_is_a_sentence(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Nothing to watch: exit code 6 and the remedy."""
    assert watch.run(["--socket", str(tmp_path / "none.sock")]) == exits.CANNOT_CONNECT
    assert "hvhost serve" in capsys.readouterr().err


def test_without_a_terminal_lines_come_and_a_closed_pipe_ends_it(tmp_path: Path) -> None:
    """Output to a pipe is lines; when its reader goes away the command ends quietly."""
    end = threading.Event()
    code = "import sys; from hvhost.cli.watch import run; sys.exit(run(sys.argv[1:]))"
    with served(tmp_path) as bench:
        def publish() -> None:
            seq = 0
            while not end.is_set():
                seq += 1
                bench.publish(replace(RUNNING, seq=seq, now_s=time.monotonic(), latched=(str(seq),)))
                end.wait(0.05)

        publisher = threading.Thread(target=publish)
        publisher.start()
        try:
            program = subprocess.Popen([sys.executable, "-c", code, "--socket", bench.path], stdout=subprocess.PIPE,
                                       stderr=subprocess.PIPE, stdin=subprocess.DEVNULL, text=True,
                                       env={**os.environ, "NO_COLOR": "1"})
            assert program.stdout is not None
            assert program.stderr is not None
            assert program.stdout.readline().startswith("this view cannot stop")
            program.stdout.close()
            assert program.wait(60) == exits.PASSED
            assert program.stderr.read() == ""
            program.stderr.close()
        finally:
            end.set()
            publisher.join()


def test_help_says_what_the_keys_do(capsys: pytest.CaptureFixture[str]) -> None:
    """The keys that stop are in the help."""
    with pytest.raises(SystemExit):
        watch.run(["--help"])
    text = capsys.readouterr().out
    assert "SPACE or c cuts at once" in text
    for option in ("--once", "--bench-display", "--no-bell", "--no-colour", "--ascii", "--plot"):
        assert option in text
    assert "cannot arm" in " ".join(text.split())
