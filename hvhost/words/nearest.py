"""The nearest right word to a mistyped one."""

from collections.abc import Iterable
from difflib import get_close_matches

CLOSE = 0.6  # similarity from which a suggestion helps more than it misleads


def nearest_word(word: str, known: Iterable[str]) -> str:
    """Return the known word most like ``word``, '' where none is close.  Case, '-', '_' and ' ' count as alike."""
    plain = {_plain(k): k for k in known}
    close = get_close_matches(_plain(word), list(plain), 1, CLOSE)
    return plain[close[0]] if close else ""


def _plain(word: str) -> str:
    return word.casefold().replace("-", " ").replace("_", " ").strip()[:80]
