"""Where the core tells what it was given and what it did; the record implements it, and silence does too."""

from collections.abc import Mapping
from typing import Any, Protocol

from hvhost.wire.frames import Block


class Journal(Protocol):
    """Every input of the core in the order in which it was taken, and what the core concluded from it."""

    def block(self, now_s: float, block: Block) -> None:
        """A block arrived."""

    def line(self, now_s: float, body: bytes) -> None:
        """Any other line arrived (its body)."""

    def garbled(self, now_s: float, reason: str, size: int) -> None:
        """A line was dropped."""

    def sent(self, now_s: float, data: bytes) -> None:
        """Bytes were handed to the port."""

    def command(self, now_s: float, data: Mapping[str, Any]) -> None:
        """A command was taken."""

    def timer(self, now_s: float) -> None:
        """The core was stepped by time alone."""

    def note(self, now_s: float, data: Mapping[str, Any]) -> None:
        """The core concluded or did something."""


class NoJournal:
    """Keeps nothing: no run is open."""

    def block(self, now_s: float, block: Block) -> None:
        """Drop it."""

    def line(self, now_s: float, body: bytes) -> None:
        """Drop it."""

    def garbled(self, now_s: float, reason: str, size: int) -> None:
        """Drop it."""

    def sent(self, now_s: float, data: bytes) -> None:
        """Drop it."""

    def command(self, now_s: float, data: Mapping[str, Any]) -> None:
        """Drop it."""

    def timer(self, now_s: float) -> None:
        """Drop it."""

    def note(self, now_s: float, data: Mapping[str, Any]) -> None:
        """Drop it."""
