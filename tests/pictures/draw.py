"""Drawing the screen of a state: to lines, to an SVG."""

from dataclasses import replace
from datetime import timedelta, timezone
from io import StringIO

from rich.console import Console
from rich.text import Text

from hvhost.publish.view import screen
from tests.pictures.states import STATES

ZONE = timezone(timedelta(hours=1), "CET")  # pictures must not depend on the machine that draws them
SIZES = ((80, 24), (120, 40), (200, 60))


def lines_of(state: str, width: int, height: int) -> list[Text]:
    """Return the lines of one state at one size."""
    snapshot, view = STATES[state]
    return screen(snapshot, replace(view, zone=ZONE), width, height)


def svg_of(state: str, width: int, height: int) -> str:
    """Return an SVG picture of one state at one size."""
    console = Console(width=width, height=height, record=True, file=StringIO(), force_terminal=True,
                      color_system="truecolor", legacy_windows=False)
    for line in lines_of(state, width, height):
        console.print(line, no_wrap=True, crop=True)
    return console.export_svg(title=f"{state} {width}x{height}")
