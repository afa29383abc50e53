"""``hvhost lower`` and ``hvhost cut``: sent to the bench that is meant, answered in words and exit codes."""

import json
import threading
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import pytest

from hvhost.cli import cut, exits, lower, stopping
from hvhost.publish.snapshot import StopState
from hvhost.words.errors import CommandRefused
from tests.pictures.states import RUNNING
from tests.publish.serving import FakeBench, served


def confirming(bench: FakeBench, stop: StopState) -> Callable[[str], None]:
    """Return a hook that publishes what became of a cut, after the cut itself."""
    def hook(method: str) -> None:
        if method == "cut":
            assert bench.server is not None
            bench.server.offer_nowait(replace(RUNNING, seq=5, stop=StopState.CUT_SENT))
            assert bench.loop is not None
            bench.loop.call_later(0.02, bench.server.offer_nowait, replace(RUNNING, seq=6, stop=stop))
    return hook


def test_a_confirmed_cut_passes(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """The answer and the confirmation are printed; only a snapshot later than the cut confirms it."""
    with served(tmp_path) as bench:
        bench.publish(replace(RUNNING, seq=4, stop=StopState.CUT_CONFIRMED))  # of an earlier cut
        bench.on_call = confirming(bench, StopState.CUT_CONFIRMED)
        assert cut.run(["--socket", bench.path]) == exits.PASSED
    assert capsys.readouterr().out == "cut: cut 1 sent; cut confirmed\n"


def test_a_cut_that_is_not_confirmed_says_what_to_do(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """S7: 'cut not confirmed: use the emergency switching off', and an exit code that a script sees."""
    with served(tmp_path) as bench:
        bench.on_call = confirming(bench, StopState.CUT_NOT_CONFIRMED)
        assert cut.run(["--socket", bench.path]) == exits.CANNOT_CONNECT
    assert "cut not confirmed: use the emergency switching off" in capsys.readouterr().err


def test_a_daemon_that_goes_silent_after_the_cut_does_not_confirm(tmp_path: Path, capsys: pytest.CaptureFixture[str],
                                                                  monkeypatch: pytest.MonkeyPatch) -> None:
    """An old confirmation is not taken for this cut's."""
    monkeypatch.setattr(stopping, "CONFIRM_S", 0.05)
    with served(tmp_path) as bench:
        bench.publish(replace(RUNNING, seq=4, stop=StopState.CUT_CONFIRMED))
        assert cut.run(["--socket", bench.path]) == exits.CANNOT_CONNECT
    assert "cut not confirmed" in capsys.readouterr().err


def test_lower_prints_the_answer(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """What the daemon says is what the operator reads; --json for scripts."""
    with served(tmp_path) as bench:
        assert lower.run(["--socket", bench.path]) == exits.PASSED
        assert lower.run(["--socket", bench.path, "--json"]) == exits.PASSED
    plain, answer = capsys.readouterr().out.splitlines()
    assert plain == "lower: lowering"
    assert json.loads(answer) == {"command": "lower", "socket": bench.path, "answer": {"text": "lowering"}, "stop": "",
                                  "exit": 0}


def test_a_refusal_keeps_its_words_and_code(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """A lower that cannot be done now says why."""
    with served(tmp_path) as bench:
        bench.answers["lower"] = CommandRefused("a link", "none", "port", "see to it")
        assert lower.run(["--socket", bench.path]) == exits.REFUSED
    error = capsys.readouterr().err
    assert "port: expected a link, found none; see to it" in error
    assert "emergency switching off" in error


@pytest.mark.parametrize("command", [cut.run, lower.run])
def test_no_daemon_is_told_without_a_traceback(command: Callable[[list[str]], int], tmp_path: Path,
                                               capsys: pytest.CaptureFixture[str],
                                               monkeypatch: pytest.MonkeyPatch) -> None:
    """A missing socket and an empty folder end in a sentence pointing to serve and to the emergency switching off."""
    monkeypatch.setenv("XDG_RUNTIME_DIR", str(tmp_path))
    monkeypatch.delenv("HVHOST_SOCKET", raising=False)
    assert command([]) == exits.CANNOT_CONNECT
    error = capsys.readouterr().err
    assert "hvhost serve" in error
    assert "emergency switching off" in error
    assert command(["--socket", str(tmp_path / "none.sock")]) == exits.CANNOT_CONNECT
    assert "emergency switching off" in capsys.readouterr().err


def test_an_unaddressed_stop_goes_to_every_bench(tmp_path: Path, capsys: pytest.CaptureFixture[str],
                                                 monkeypatch: pytest.MonkeyPatch) -> None:
    """Whoever stops in a hurry is not asked which bench."""
    monkeypatch.setenv("XDG_RUNTIME_DIR", str(tmp_path))
    monkeypatch.delenv("HVHOST_SOCKET", raising=False)
    folder = tmp_path / "hvhost"
    folder.mkdir()
    with served(folder, name="a.sock") as first, served(folder, name="b.sock") as second:
        assert lower.run([]) == exits.PASSED
        assert [first.asked, second.asked] == [[("lower", {})], [("lower", {})]]
        assert lower.run(["--socket", "b"]) == exits.PASSED
        assert len(second.asked) == 2
    assert len(capsys.readouterr().out.splitlines()) == 3


@pytest.mark.parametrize("command", [cut.run, lower.run])
def test_usage_and_help(command: Callable[[list[str]], int], capsys: pytest.CaptureFixture[str]) -> None:
    """A wrong option is exit code 2; the help lists the exit codes."""
    with pytest.raises(SystemExit) as wrong:
        command(["--now"])
    assert wrong.value.code == exits.USAGE
    with pytest.raises(SystemExit) as helped:
        command(["--help"])
    assert helped.value.code == 0
    assert "exit codes: 0 done, passed; 1 failed" in " ".join(capsys.readouterr().out.split())


def test_stops_of_many_hands_at_once(tmp_path: Path) -> None:
    """Several commands at the same moment are all carried out."""
    with served(tmp_path) as bench:
        hands = [threading.Thread(target=lower.run, args=(["--socket", bench.path, "--json"],)) for _ in range(6)]
        for hand in hands:
            hand.start()
        for hand in hands:
            hand.join(20.0)
        assert bench.asked == [("lower", {})] * 6
