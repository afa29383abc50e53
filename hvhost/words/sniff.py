"""Which kind of file a text is, by its first key."""

import re

from hvhost.words.findings import Finding, Grade

KINDS = {"bench": "a bench file", "plan": "a plan", "sheet": "a run sheet"}
_KIND = re.compile(r"^(bench|plan|sheet)[ ]*:(?:[ \t]|$)", re.MULTILINE)


def sniff_kind(text: str) -> str:
    """Return 'bench', 'plan' or 'sheet' by the first of these keys at the left margin, else 'unknown'."""
    match = _KIND.search(text.removeprefix("\ufeff"))
    return match[1] if match else "unknown"


def other_kind(file: str, text: str, wanted: str) -> tuple[Finding, ...]:
    """The one finding for a file that is plainly of another kind; none where it may be the kind that is wanted."""
    kind = sniff_kind(text)
    if kind in (wanted, "unknown"):
        return ()
    return (Finding(grade=Grade.REFUSE, file=file, line=1, what="file", expected=f"{KINDS[wanted]} ({wanted}: ...)",
                    found=f"{KINDS[kind]} ({kind}: ...)", remedy="name the files in their order"),)
