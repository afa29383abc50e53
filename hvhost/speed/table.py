"""The figures as a table for people: one line each, its note beneath."""

from collections.abc import Sequence

from hvhost.speed.figures import Line

WIDTHS = (4, 54, 12, 12, 10)


def table(lines: Sequence[Line], *, machine: str = "") -> str:
    """Return the lines as text, the machine's own word first."""
    out = [machine] if machine else []
    out.append(_row("", "what", "measured", "bound", "aim", ""))
    for line in lines:
        sign = "≤" if line.worst == "most" else "≥"
        bound = f"{sign} {_number(line.bound)} {line.unit}".rstrip() if line.judged else "-"
        aim = "-" if line.aim is None else f"{_number(line.aim)} {line.unit}".rstrip()
        verdict = "" if not line.judged else "within" if line.within else "NOT WITHIN"
        out.append(_row(line.budget, line.what, f"{_number(line.measured)} {line.unit}".rstrip(), bound, aim, verdict))
        out.append("     against " + line.against + (f"; {line.note}" if line.note else ""))
    beyond = [line for line in lines if not line.within]
    out.append("")
    out.append("every bound holds" if not beyond else
               f"{len(beyond)} of {sum(line.judged for line in lines)} bounds not held: "
               + ", ".join(dict.fromkeys(line.budget for line in beyond)))
    return "\n".join(out)


def _row(*cells: str) -> str:
    return " ".join(f"{cell:<{width}}" for cell, width in zip(cells, (*WIDTHS, 0), strict=True)).rstrip()


def _number(value: float) -> str:
    return f"{value:.3g}" if abs(value) < 100 else f"{value:.0f}"
