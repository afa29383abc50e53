"""Draws every state of the screen and of the display beside the arm input: ``python -m tests.pictures OUTDIR``.

``--size 80x24`` and ``--state NAME`` choose some, ``--page`` the screen or the display, ``--no-colour`` draws without.
"""

import argparse
from pathlib import Path

from tests.pictures.draw import PAGES, SIZES, svg_of
from tests.pictures.states import STATES


def main() -> None:
    """Write one SVG for each page, state and size."""
    parser = argparse.ArgumentParser(prog="python -m tests.pictures", description=__doc__)
    parser.add_argument("outdir", type=Path)
    parser.add_argument("--size", action="append", metavar="80x24", help="only this size; may be repeated")
    parser.add_argument("--state", action="append", choices=sorted(STATES), help="only this state; may be repeated")
    parser.add_argument("--page", action="append", choices=sorted(PAGES), help="only this page")
    parser.add_argument("--no-colour", action="store_true", help="as a terminal without colour shows it")
    options = parser.parse_args()
    sizes = [tuple(map(int, size.split("x"))) for size in options.size or ()] or SIZES
    options.outdir.mkdir(parents=True, exist_ok=True)
    drawn = [(page, state, size) for page in options.page or PAGES for state in options.state or STATES
             for size in sizes]
    for page, state, (width, height) in drawn:
        path = options.outdir / f"{page}-{state.replace(' ', '-')}-{width}x{height}.svg"
        path.write_text(svg_of(state, width, height, PAGES[page], colour=not options.no_colour), encoding="utf-8")
    print(f"{len(drawn)} pictures in {options.outdir}")


if __name__ == "__main__":
    main()
