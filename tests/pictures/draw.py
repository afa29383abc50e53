"""Drawing the screen of a state: to lines, to an SVG."""

from collections.abc import Callable
from dataclasses import replace
from datetime import timedelta, timezone
from io import StringIO

from rich.console import Console
from rich.style import Style
from rich.text import Span, Text

from hvhost.publish.display import bench_display
from hvhost.publish.snapshot import Snapshot
from hvhost.publish.view import screen
from hvhost.publish.wording import View
from tests.pictures.states import STATES

ZONE = timezone(timedelta(hours=1), "CET")  # pictures must not depend on the machine that draws them
Page = Callable[[Snapshot, View, int, int], list[Text]]
PAGES: dict[str, Page] = {"screen": screen, "display": bench_display}
SIZES = ((80, 24), (120, 40), (200, 60))


def lines_of(state: str, width: int, height: int, page: Page = screen) -> list[Text]:
    """Return the lines of one state at one size."""
    snapshot, view = STATES[state]
    return page(snapshot, replace(view, zone=ZONE), width, height)


def svg_of(state: str, width: int, height: int, page: Page = screen, *, colour: bool = True) -> str:
    """Return an SVG picture of one state at one size; without colour as a terminal with NO_COLOR draws it."""
    console = Console(width=width, height=height, record=True, file=StringIO(), force_terminal=True,
                      color_system="truecolor", legacy_windows=False)
    for line in lines_of(state, width, height, page):
        console.print(line if colour else without_colour(line), no_wrap=True, crop=True)
    return console.export_svg(title=f"{state} {width}x{height}")


def without_colour(line: Text) -> Text:
    """Return the line with bold and reverse kept and every colour gone."""
    plain = line.copy()
    plain.style = _grey(line.style)
    plain.spans = [Span(one.start, one.end, _grey(one.style)) for one in line.spans]
    return plain


def _grey(style: str | Style) -> Style:
    parsed = style if isinstance(style, Style) else Style.parse(style or "")
    return Style(bold=parsed.bold, reverse=parsed.reverse or None)
