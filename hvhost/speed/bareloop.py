"""A bare event loop beside a loaded daemon: what the machine itself makes a loop wait.

``python -m hvhost.speed.bareloop`` beats until standard input ends, then prints its longest lateness and p99.9.
"""

import asyncio
import json
import subprocess
import sys

from hvhost.publish.stalls import StallGauge


class BareLoop:
    """The process; `end` gives what it saw."""

    def __init__(self) -> None:
        self._child = subprocess.Popen([sys.executable, "-m", "hvhost.speed.bareloop"], stdin=subprocess.PIPE,
                                       stdout=subprocess.PIPE)

    def end(self) -> dict[str, float]:
        """End it; returns ``longest_s`` and ``p999_s``."""
        out, _ = self._child.communicate(timeout=30.0)
        found: dict[str, float] = json.loads(out)
        return found


async def _beat(gauge: StallGauge) -> None:
    ended = asyncio.Event()
    asyncio.get_running_loop().add_reader(0, ended.set)
    gauge.start()
    await ended.wait()
    gauge.stop()


def main() -> None:
    """Beat until standard input ends."""
    gauge = StallGauge()
    asyncio.run(_beat(gauge))
    print(json.dumps({"longest_s": gauge.late.longest_s, "p999_s": gauge.late.quantile(0.999)}))


if __name__ == "__main__":
    main()
