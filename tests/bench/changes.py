"""The demo bench with changes, for tests of checks: ``block.key=value``."""

from pathlib import Path

from hvhost.bench.file import check_text
from hvhost.words.findings import Finding, Grade

DEMO = (Path(__file__).parents[2] / "configs" / "demo.bench.yaml").read_text(encoding="utf-8")
REFUSE, REASON, NOTE = Grade.REFUSE, Grade.REASON, Grade.NOTE

Side = tuple[tuple[str, ...], tuple[str, ...], Grade, str]  # changes that are fine, that are not, grade, key


def changed(*changes: str) -> str:
    """The demo bench with ``block.key=value`` changes; ``=`` alone drops the line, a key that is not there is added."""
    lines = DEMO.split("\n")
    for change in changes:
        place, _, value = change.partition("=")
        parts = place.split(".")
        at = -1
        for depth, part in enumerate(parts):
            head = "  " * depth + part + ":"
            found = next((n for n in range(at + 1, len(lines)) if lines[n].startswith(head)), None)
            if found is None:
                lines.insert(at + 1, head)
                found = at + 1
            at = found
        lines[at] = f"{lines[at].partition(':')[0]}: {value}" if value else ""
    return "\n".join(lines)


def findings(*changes: str) -> tuple[Finding, ...]:
    """What checking the changed demo bench says."""
    return check_text("b.yaml", changed(*changes))


def assert_both_sides(fine: tuple[str, ...], faulty: tuple[str, ...], grade: Grade, key: str) -> None:
    """On this side of the bound nothing is said, on the other exactly this key at its line."""
    assert [f.text for f in findings(*fine)] == []
    told = findings(*faulty)
    assert [(f.grade, f.what) for f in told] == [(grade, key)], [f.text for f in told]
    name = key.split(".")[-1]
    assert changed(*faulty).split("\n")[told[0].line - 1].strip().startswith(f"{name}:")


def name_of(value: object) -> str:
    """A test's name from its changes."""
    return "+".join(value) if isinstance(value, tuple) else str(value)
