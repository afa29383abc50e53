"""A bare event loop beside a loaded daemon: what the machine itself makes a loop wait.

``python -m hvhost.speed.bareloop`` beats until standard input ends, then prints its longest lateness and p99.9; and by
how much the processor time of one and the same work swelled at worst: a machine that is not ours alone counts time of
others, and of caches that others emptied, as ours.
"""

import asyncio
import json
import subprocess
import sys
import time

from hvhost.publish.stalls import Spread, StallGauge

STEPS = 6_000  # about as much work as composing a snapshot
PAUSE_S = 0.1  # and as often


class BareLoop:
    """The process; `end` gives what it saw."""

    def __init__(self) -> None:
        self._child = subprocess.Popen([sys.executable, "-m", "hvhost.speed.bareloop"], stdin=subprocess.PIPE,
                                       stdout=subprocess.PIPE)

    def end(self) -> dict[str, float]:
        """End it; returns ``longest_s``, ``p999_s``, and ``swelling``: a fixed work's longest time by its median."""
        out, _ = self._child.communicate(timeout=30.0)
        found: dict[str, float] = json.loads(out)
        return found


async def _beat(gauge: StallGauge) -> float:
    ended = asyncio.Event()
    asyncio.get_running_loop().add_reader(0, ended.set)
    gauge.start()
    spent = Spread()
    while not ended.is_set():
        begun = time.thread_time()
        sum(k * k for k in range(STEPS))
        spent.add(time.thread_time() - begun)
        await asyncio.sleep(PAUSE_S)
    gauge.stop()
    return spent.longest_s / spent.quantile(0.5)


def main() -> None:
    """Beat until standard input ends."""
    gauge = StallGauge()
    swelling = asyncio.run(_beat(gauge))
    print(json.dumps({"longest_s": gauge.late.longest_s, "p999_s": gauge.late.quantile(0.999), "swelling": swelling}))


if __name__ == "__main__":
    main()
