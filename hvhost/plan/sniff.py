"""Which kind of file a text is, by its first key."""

import re

_KIND = re.compile(r"^(bench|plan|sheet)[ ]*:(?:[ \t]|$)", re.MULTILINE)


def sniff_kind(text: str) -> str:
    """Return 'bench', 'plan' or 'sheet' by the first of these keys at the left margin, else 'unknown'."""
    match = _KIND.search(text.removeprefix("\ufeff"))
    return match[1] if match else "unknown"
