"""Figures that scenarios measure on the way; they depend on the machine, so no test judges them."""

FIGURES: list[str] = []


def figure(name: str, value: float, unit: str) -> None:
    """Keep one figure for the summary."""
    FIGURES.append(f"{name:<60} {value:10.3f} {unit}")
