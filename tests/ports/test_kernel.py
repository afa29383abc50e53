"""What the kernel tells about its clock."""

import ctypes

import pytest

from hvhost.ports import kernel


def test_it_tells_or_says_that_it_does_not() -> None:
    """On Linux a state with a bound that is no less than zero; None elsewhere."""
    state = kernel.clock_state()
    if state is not None:
        assert state.worst_s >= 0.0
        assert isinstance(state.synchronised, bool)


def test_a_system_without_the_call_tells_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    """No adjtimex, no answer, no error."""
    class Nothing:
        def __init__(self, *_: object, **__: object) -> None:
            pass

    monkeypatch.setattr(ctypes, "CDLL", Nothing)
    assert kernel.clock_state() is None
