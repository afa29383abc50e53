"""The tree of errors: sentences that name expected, found, place and remedy."""

import pytest

from hvhost.words import errors
from hvhost.words.errors import FileFault, HvhostError

CLASSES = [c for c in vars(errors).values() if isinstance(c, type) and issubclass(c, HvhostError)]


@pytest.mark.parametrize("kind", CLASSES)
def test_sentence(kind: type[HvhostError]) -> None:
    """Every class makes the same sentence of its parts."""
    whole = str(kind("a port", "nothing", "/dev/x", "plug it in"))
    assert whole == "/dev/x: expected a port, found nothing; plug it in"
    assert str(kind("busy")) == "busy"
    assert str(kind("busy", where="/dev/x")) == "/dev/x: busy"
    assert str(kind("busy", remedy="close it")) == "busy; close it"


@pytest.mark.parametrize("kind", CLASSES)
def test_exit_codes_are_never_success(kind: type[HvhostError]) -> None:
    """No error leaves with 0 or with the interpreter's own 1."""
    assert kind.exit_code >= 2


def test_file_fault_keeps_its_findings() -> None:
    """A refused file carries every finding."""
    assert FileFault("a file", findings=(1, 2)).findings == (1, 2)
    assert FileFault("a file").findings == ()
