"""B11, first half: how long ``--help`` takes, beside a bare start of the interpreter."""

import subprocess
import sys
import time

from hvhost.speed.figures import Line, interleaved
from hvhost.speed.setting import Setting

STARTS = 5  # starts in a block: a start costs as much as thousands of the calls measured elsewhere


def measure(setting: Setting) -> list[Line]:
    """Return the line of ``--help``; that of ``cut`` needs a daemon and is measured with it."""
    sides = interleaved(lambda: _starts(["-m", "hvhost", "--help"]), lambda: _starts(["-c", "pass"]),
                        blocks=setting.blocks, say=setting.say)
    raw = sides.raw(1e3)
    return [Line(budget="B11", what="--help", measured=sides.ratio, unit="x", bound=6.0,
                 against="a bare start of the interpreter",
                 note=f"{raw['ours']['median']:.0f} ms against {raw['other']['median']:.0f} ms", raw=raw)]


def _starts(arguments: list[str]) -> list[float]:
    seconds = []
    for _ in range(STARTS):
        begun = time.perf_counter()
        subprocess.run([sys.executable, *arguments], stdin=subprocess.DEVNULL, stdout=subprocess.DEVNULL, check=True)
        seconds.append(time.perf_counter() - begun)
    return seconds
