"""The judge: reads the stand-in's truth file, by its documented format alone, and nothing of the host's code.

Numbers of the protocol that it needs (states, causes) are written out here from PROTOCOL.md.
"""

import json
import threading
from collections.abc import Callable
from itertools import pairwise
from pathlib import Path
from typing import Any

OFF, REQUESTED, PROVING, WARNING, ENERGISED, PAUSING, LOWERING = range(7)  # PROTOCOL.md section 5
OVERCURRENT, BREAKDOWN, HOST_SILENT, HOST_RULE = 1 << 0, 1 << 2, 1 << 15, 1 << 16  # PROTOCOL.md section 12
RESTARTED, RESTARTED_ENERGISED = 1 << 20, 1 << 21

Line = dict[str, Any]


class Truth:
    """What the plant and the MCU really did, as far as it is written by now."""

    def __init__(self, path: Path) -> None:
        self.path = path
        self._lines: list[Line] = []
        self._states: list[Line] = []
        self._read = 0
        self._lock = threading.Lock()

    def _look(self) -> None:
        """Take the complete lines that were written since the last look."""
        with self._lock, self.path.open("rb") as file:
            file.seek(self._read)
            data = file.read()
            data = data[: data.rfind(b"\n") + 1]
            self._read += len(data)
            fresh = [json.loads(line) for line in data.splitlines()]
            self._lines += fresh
            self._states += [line for line in fresh if line["kind"] == "state"]

    @property
    def lines(self) -> list[Line]:
        """Every complete line."""
        self._look()
        return list(self._lines)

    @property
    def tick_hz(self) -> int:
        """Ticks per second of the MCU's count."""
        return int(self.lines[0]["tick_hz"])

    @property
    def states(self) -> list[Line]:
        """State lines in order."""
        self._look()
        return list(self._states)

    @property
    def last(self) -> Line:
        """The newest state line, {} before the first."""
        self._look()
        return self._states[-1] if self._states else {}

    def events(self, what: str) -> list[Line]:
        """Events of one kind in order."""
        return [line for line in self.lines if line["kind"] == "event" and line["what"] == what]

    def first(self, condition: Callable[[Line], bool], after: int = -1) -> Line | None:
        """The first state line after a tick that meets the condition."""
        return next((line for line in self.states if line["tick"] > after and condition(line)), None)


def stopped(line: Line) -> bool:
    """Whether a state line shows every means of the cut path in its cut position and words at zero."""
    return bool(line["inhibit"] and line["clear"] and not line["relay"] and not line["v_word"] and not line["i_word"]
                and line["mcu"] == OFF)


def assert_words_never_rise(states: list[Line]) -> None:
    """No voltage word is above the one before it."""
    for before, after in pairwise(states):
        assert after["v_word"] <= before["v_word"], f"the word rose: {before} then {after}"


def assert_stays_off(states: list[Line]) -> None:
    """Every line shows words at zero, the inhibit asserted, the relay open and the MCU off."""
    for line in states:
        assert stopped(line), f"not off: {line}"


def assert_never_released(states: list[Line]) -> None:
    """The inhibit is asserted and the words are zero in every line."""
    for line in states:
        assert line["inhibit"], f"inhibit released: {line}"
        assert not line["v_word"], f"a word above zero: {line}"


def assert_lowered(truth: Truth, gone_tick: int, *, lease_s: float, slew_words_per_s: float,
                   lower_max_s: float) -> tuple[float, float]:
    """Judge S4 after the host was gone at ``gone_tick``: returns seconds to the lowering and to zero words.

    The lowering begins within the lease, words are zero and the cut is done within lease + V/slew or
    lease + ``lower_max_s``, whichever is sooner, and words never rise from the lowering on.
    """
    tick_hz = truth.tick_hz
    begun = truth.first(lambda line: line["mcu"] in (LOWERING, OFF), gone_tick)
    assert begun is not None, f"no lowering after tick {gone_tick}: {truth.last}"
    sample_s = 0.001  # state lines are written once a sample
    to_lower_s = (begun["tick"] - gone_tick) / tick_hz
    assert to_lower_s <= lease_s + 2 * sample_s, f"lowering after {to_lower_s:.4f} s, lease {lease_s} s"
    zero = truth.first(stopped, gone_tick)
    assert zero is not None, f"no cut after tick {gone_tick}: {truth.last}"
    to_zero_s = (zero["tick"] - gone_tick) / tick_hz
    highest = max(line["v_word"] for line in truth.states if gone_tick - tick_hz // 50 <= line["tick"] <= begun["tick"])
    bound_s = lease_s + min(highest / slew_words_per_s, lower_max_s)
    assert to_zero_s <= bound_s + 3 * sample_s, f"zero after {to_zero_s:.3f} s, bound {bound_s:.3f} s"
    after = [line for line in truth.states if line["tick"] >= begun["tick"]]
    assert_words_never_rise(after)
    assert_stays_off([line for line in after if line["tick"] > zero["tick"]])
    return to_lower_s, to_zero_s
