"""Fitting text into cells: breaking it at blanks, clipping it so that one sees that it is clipped."""

from collections.abc import Sequence

from rich.cells import cell_len, set_cell_size


def wrapped(text: str, width: int, most: int, mark: str = "") -> list[str]:
    """Return ``text`` broken at blanks into at most ``most`` lines; what is left over ends in an ellipsis."""
    lines, line = [], mark
    for word in text.split():
        joined = f"{line} {word}" if line and line != mark else f"{line}{word}"
        if cell_len(joined) <= width or not line.strip():
            line = joined
        else:
            lines.append(line)
            line = " " * len(mark) + word
    lines.append(line)
    if len(lines) > most:
        lines = [*lines[: most - 1], f"{lines[most - 1][: max(0, width - 1)]}…"] if most else []
    return lines


def joined(parts: Sequence[str], between: str, width: int, most: int, mark: str = "") -> list[str]:
    """Return parts in lines, broken only between them where each fits a line of its own; see `wrapped`."""
    lines, line = [], ""
    for part in parts:
        longer = f"{line}{between}{part}" if line else part
        if line and cell_len(mark) + cell_len(longer) > width:
            lines.append(line)
            line = part
        else:
            line = longer
    lines.append(line)
    if len(lines) > most or any(cell_len(mark) + cell_len(one) > width for one in lines):
        return wrapped(between.join(parts), width, most, mark)
    return [f"{mark if n == 0 else ' ' * len(mark)}{one}" for n, one in enumerate(lines)]


def cells(text: str, width: int) -> str:
    """Return ``text`` in exactly ``width`` cells, with an ellipsis where it was longer."""
    return set_cell_size(text, width) if cell_len(text) <= width else set_cell_size(text, width - 1) + "…"
