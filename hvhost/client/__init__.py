"""The bench from Python: set-points, readings as arrays, stops, and the record of every run.

    from hvhost.client import connect

    with connect() as bench:
        bench.set(volts=5e3, amps=1e-3, slew=500)      # needs an energised direct run
        for block in bench.readings(seconds=10):
            print(block.volts.max(), block.dropped)
        bench.lower()

Nothing here arms: a run is prepared from here at most, and energised by ``hvhost arm`` and the press at the bench.
``lower`` and ``cut`` need no control and go ahead of everything else; neither is an emergency switching off.

Volts, amps and seconds everywhere.  Live values are magnitudes in the direction of the bench's polarity, as ``set``
takes them; a run's record has the output's sign and the units in its names.  ``connect_async`` gives the same bench
for asyncio.  Errors are those of :mod:`hvhost.words.errors`: ``CommandRefused`` (nothing was done), ``FileFault``,
``CannotConnect``.
"""

from hvhost.client.asking import Prepared
from hvhost.client.bench import Bench, connect
from hvhost.client.parallel import AsyncBench, connect_async
from hvhost.client.readings import Readings
from hvhost.client.runs import Record, Runs, open_runs
from hvhost.words.errors import CannotConnect, CommandRefused, FileFault, HvhostError

__all__ = ["AsyncBench", "Bench", "CannotConnect", "CommandRefused", "FileFault", "HvhostError", "Prepared", "Readings",
           "Record", "Runs", "connect", "connect_async", "open_runs"]
