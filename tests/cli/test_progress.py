"""Progress: quiet for two seconds, then one changing line or a line now and then."""

import io

import pytest

from hvhost.cli import progress
from hvhost.cli.progress import Progress


class Terminal(io.StringIO):
    """A stream that is a terminal."""

    def isatty(self) -> bool:
        """Yes."""
        return True


def shown(out: io.StringIO, monkeypatch: pytest.MonkeyPatch, times: list[float]) -> str:
    """What is told at these times."""
    now = [0.0]
    monkeypatch.setattr(progress.time, "monotonic", lambda: now[0])
    told = Progress("export", out)
    for at, time_s in enumerate(times, start=1):
        now[0] = time_s
        told(at, len(times))
    told.clear()
    return out.getvalue()


def test_what_is_quick_says_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    """Below two seconds there is nothing to tell."""
    assert shown(Terminal(), monkeypatch, [0.5, 1.0, 1.9]) == ""


def test_a_terminal_shows_one_line_that_is_gone_in_the_end(monkeypatch: pytest.MonkeyPatch) -> None:
    """Percent in place, at most five times a second, and blanks at the end."""
    text = shown(Terminal(), monkeypatch, [1.0, 2.5, 2.6, 3.0])
    assert text.startswith("\rexport: 50 %\rexport: 100 %\r")
    assert text.endswith("\r")
    assert "\n" not in text


def test_without_a_terminal_there_is_a_line_now_and_then(monkeypatch: pytest.MonkeyPatch) -> None:
    """A log is not filled."""
    assert shown(io.StringIO(), monkeypatch, [3.0, 10.5, 12.0, 21.0]) == "export: 50 %\nexport: 100 %\n"
