"""Keys: which byte asks for what, and the thread that reads them from a real pseudo-terminal."""

import os
import pty
import termios
import threading
from collections.abc import Iterator

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.publish.keys import Act, KeyParser, KeyReader


@pytest.mark.parametrize(("data", "acts"), [
    (b" ", [Act.CUT]), (b"c", [Act.CUT]), (b"C", [Act.CUT]), (b"l", [Act.LOWER]), (b"L", [Act.LOWER]),
    (b"q", [Act.LEAVE]), (b"\x03", [Act.INTERRUPT]), (b"xyz\r\n\t0", []),
    (b"tB", [Act.PLOT, Act.BELL]), (b"lc", [Act.LOWER, Act.CUT]),
    (b"\x1b[A", []), (b"\x1bOc", []), (b"\x1b[?62;22c", []), (b"\x1b[3~ ", [Act.CUT]), (b"\x1bl", []),
    (b"\x1b[?62c\x1b[Bc", [Act.CUT]), ("ц ".encode(), [Act.CUT]),
])
def test_bytes_become_acts(data: bytes, acts: list[Act]) -> None:
    """Stop keys in either case; what a terminal sends of itself (ECMA-48 sequences) stops nothing."""
    assert KeyParser().feed(data, 1.0) == acts


def test_a_sequence_may_come_in_pieces() -> None:
    """An answer of the terminal that is torn by the line is still swallowed."""
    parser = KeyParser()
    assert [parser.feed(bytes((byte,)), 1.0) for byte in b"\x1b[?62;c"] == [[]] * 7


def test_an_escape_key_does_not_swallow_the_cut_after_it() -> None:
    """Whoever hits Esc and then the cut key a moment later cuts."""
    for start in (b"\x1b", b"\x1b[", b"\x1b[12;"):
        parser = KeyParser()
        assert parser.feed(start, 1.0) == []
        assert parser.feed(b"c", 1.3) == [Act.CUT]


@given(st.binary(max_size=300))
def test_a_cut_key_works_after_any_bytes(data: bytes) -> None:
    """Whatever came before, a space a moment later cuts."""
    parser = KeyParser()
    parser.feed(data, 1.0)
    assert parser.feed(b" ", 2.0) == [Act.CUT]


@pytest.fixture
def terminal() -> Iterator[tuple[int, int]]:
    """Give both ends of a pseudo-terminal."""
    ours, theirs = pty.openpty()
    yield ours, theirs
    os.close(ours)
    os.close(theirs)


def test_the_reader_acts_from_its_own_thread(terminal: tuple[int, int]) -> None:
    """A key is acted on while the main thread does nothing at all; modes are restored after."""
    ours, theirs = terminal
    before = termios.tcgetattr(theirs)
    acted: list[tuple[Act, str]] = []
    done = threading.Event()

    def act(one: Act) -> None:
        acted.append((one, threading.current_thread().name))
        if one is Act.CUT:
            done.set()

    with KeyReader(act, lambda: 1.0, theirs) as keys:
        assert keys.reads
        modes = termios.tcgetattr(theirs)
        assert not modes[0] & termios.IXON
        assert not modes[3] & (termios.ECHO | termios.ICANON | termios.ISIG)
        os.write(ours, b"l\x03\x1b[A ")
        assert done.wait(10.0)
    assert acted == [(Act.LOWER, "keys"), (Act.INTERRUPT, "keys"), (Act.CUT, "keys")]
    assert termios.tcgetattr(theirs) == before


def test_without_a_terminal_nothing_is_read() -> None:
    """A pipe is no keyboard: such a view cannot stop, and knows it."""
    read, write = os.pipe()
    with KeyReader(lambda act: None, lambda: 1.0, read) as keys:
        assert not keys.reads
    os.close(read)
    os.close(write)
