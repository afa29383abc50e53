"""Draws every state of the screen: ``python -m tests.pictures OUTDIR [--size 80x24]``."""

import argparse
from pathlib import Path

from tests.pictures.draw import SIZES, svg_of
from tests.pictures.states import STATES


def main() -> None:
    """Write one SVG for each state and size."""
    parser = argparse.ArgumentParser(prog="python -m tests.pictures", description=__doc__)
    parser.add_argument("outdir", type=Path)
    parser.add_argument("--size", action="append", metavar="80x24", help="only this size; may be repeated")
    parser.add_argument("--state", action="append", choices=sorted(STATES), help="only this state; may be repeated")
    options = parser.parse_args()
    sizes = [tuple(map(int, size.split("x"))) for size in options.size or ()] or SIZES
    options.outdir.mkdir(parents=True, exist_ok=True)
    for width, height in sizes:
        for state in options.state or STATES:
            path = options.outdir / f"{state.replace(' ', '-')}-{width}x{height}.svg"
            path.write_text(svg_of(state, width, height), encoding="utf-8")
    print(f"{len(sizes) * len(options.state or STATES)} pictures in {options.outdir}")


if __name__ == "__main__":
    main()
