"""A run's samples as numpy columns, units in the names: what Parquet, CSV and the Python client all show.

Names, units and meanings: FORMAT.md, section 7.  Values have the output's sign.
"""

import numpy as np
from numpy.typing import NDArray

from hvhost.record.data import RunData
from hvhost.samples.blocks import Flags
from hvhost.wire.vocabulary import McuState

STATES = tuple(state.name.lower() for state in McuState)
OTHER_STATE = "unknown"

Column = NDArray[np.generic]


def columns_of(run: RunData, a: int, b: int) -> dict[str, Column]:
    """Return the columns of the rows a to b; ``t`` in UTC nanoseconds, ``state`` as a number into STATES."""
    meta, sign = run.meta, run.meta.polarity
    tick = run.tick(a, b)
    v_word = meta.v_program.values(run.of_rows("v_word", a, b).astype(np.int32))
    i_word = meta.i_program.values(run.of_rows("i_word", a, b).astype(np.int32))
    return {
        "t": run.utc_ns(tick), "tick": tick, "index": run.index(a, b), "host_s": run.of_rows("arrival", a, b),
        "voltage_kV": (sign * run.volts(a, b) / 1e3).astype(np.float32),
        "current_mA": (sign * run.amps(a, b) * 1e3).astype(np.float32),
        "v_set_kV": (sign * v_word / 1e3).astype(np.float32), "i_set_mA": (sign * i_word * 1e3).astype(np.float32),
        "state": np.minimum(run.of_rows("state", a, b).astype(np.int64), len(STATES)),
        "latched": run.of_rows("latched", a, b).astype(np.bool_), "inputs": run.of_rows("inputs", a, b),
        "arc": run.of_rows("arc", a, b), "flags": _flags(run, a, b),
    }


def _flags(run: RunData, a: int, b: int) -> NDArray[np.uint16]:
    """Return the flags of the rows a to b."""
    v, i = run.v_code[a:b], run.i_code[a:b]
    flags = np.where(run.meta.voltage.off_limits(v), 0, int(Flags.LIMIT_V)).astype(np.uint16)
    flags |= np.where(run.meta.current.off_limits(i), 0, int(Flags.LIMIT_I)).astype(np.uint16)
    for gap in run.gaps:
        if a <= gap.row < b:
            flags[gap.row - a] |= int(Flags.GAP)
    missed = np.zeros(len(run.head), dtype=np.uint16)
    missed[1:][np.diff(run.head["missed"].astype(np.int64)) != 0] = int(Flags.MISSED)
    return np.asarray(flags | missed[run.blocks_of(a, b)], dtype=np.uint16)
