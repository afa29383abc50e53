"""Parquet beside the block file: ``python -m hvhost.record.parquet RUNDIR [FILE]`` (always a process of its own).

The first conversion may import half a data-science stack and a damaged input may stop a reader, so the daemon never
does this itself; ``export.py`` starts it.  Columns, units and metadata: FORMAT.md, section 7.
"""

import json
import os
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq

from hvhost.record.columns import OTHER_STATE, STATES, columns_of
from hvhost.record.data import RunData, load_run
from hvhost.record.folder import SAMPLES, RunFolder, sync_folder
from hvhost.record.manifest import file_hash
from hvhost.words.errors import HvhostError

ROWS = 1 << 17  # rows per group

COLUMNS: tuple[tuple[str, Any, str, str], ...] = (
    ("t", pa.timestamp("ns", tz="UTC"), "", "when the sample was taken"),
    ("tick", pa.int64(), "tick", "MCU ticks, unwrapped"),
    ("index", pa.int64(), "", "sample index, unwrapped"),
    ("host_s", pa.float64(), "s", "host monotonic time at which the block arrived"),
    ("voltage_kV", pa.float32(), "kV", "voltage readback"),
    ("current_mA", pa.float32(), "mA", "current readback"),
    ("v_set_kV", pa.float32(), "kV", "voltage set-point applied at the block's first sample"),
    ("i_set_mA", pa.float32(), "mA", "current set-point applied at the block's first sample"),
    ("state", pa.dictionary(pa.int8(), pa.string()), "", "state of the MCU"),
    ("latched", pa.bool_(), "", "a cause stands latched"),
    ("inputs", pa.uint16(), "mask", "inputs and read-backs, bits of the protocol"),
    ("arc", pa.uint32(), "", "number of the last arc of the arm"),
    ("flags", pa.uint16(), "mask", "1 voltage code at the converter's limit, 2 current code at it, "
                                   "32 samples are missing before this row, 64 the MCU missed conversions"),
)
DELTA = ("t", "tick", "index")
SCATTERED = ("host_s", "voltage_kV", "current_mA")


def schema_of(run: RunData) -> Any:
    """Return the Arrow schema with units and the run's metadata."""
    fields = [pa.field(name, kind, nullable=False, metadata={"unit": unit, "description": text})
              for name, kind, unit, text in COLUMNS]
    meta = run.meta
    about = {"run": meta.run, "tag": f"{meta.tag:08X}", "kind": meta.kind, "polarity": f"{meta.polarity:+d}",
             "tick_Hz": repr(meta.tick_hz), "format": "1", "samples_missing": str(run.missing),
             "repeated_blocks": str(run.repeated_blocks),
             "damage": json.dumps([f"{d.offset}: {d.kind}: {d.text}" for d in run.damage]),
             "utc": "ticks to host time by the anchors, host time to UTC as it stood when the run was opened",
             "block_file_sha256": _block_file_hash(run.folder)}
    return pa.schema(fields, metadata={f"hvhost.{key}": value for key, value in about.items()})


def _block_file_hash(folder: RunFolder | None) -> str:
    return file_hash(folder.blocks) if folder is not None and folder.blocks.exists() else ""


def _table(run: RunData, schema: Any, a: int, b: int) -> Any:
    """Return the rows a to b."""
    columns: dict[str, Any] = dict(columns_of(run, a, b))
    columns["t"] = pa.array(columns["t"], pa.int64()).cast(schema.field("t").type)
    state = pa.array(columns["state"].astype(np.int8))
    columns["state"] = pa.DictionaryArray.from_arrays(state, pa.array([*STATES, OTHER_STATE]))
    arrays = [pa.array(column, schema.field(name).type) if isinstance(column := columns[name], np.ndarray) else column
              for name in schema.names]
    return pa.Table.from_arrays(arrays, schema=schema)


def _tables(run: RunData, schema: Any) -> Iterator[Any]:
    for a in range(0, run.rows, ROWS):
        yield _table(run, schema, a, min(a + ROWS, run.rows))


def export(folder: RunFolder, path: Path | None = None) -> Path:
    """Write a run's samples, to ``samples.parquet`` where no path is given: whole under its name, or not at all."""
    run = load_run(folder)
    schema = schema_of(run)
    path = path or folder.path / SAMPLES
    temporary = path.with_name(f".{path.name}.tmp")
    plain = {name for name, *_ in COLUMNS} - {*DELTA, *SCATTERED}
    with pq.ParquetWriter(
            temporary, schema, compression="zstd", compression_level=9, use_dictionary=sorted(plain),
            column_encoding={**dict.fromkeys(DELTA, "DELTA_BINARY_PACKED"),
                             **dict.fromkeys(SCATTERED, "BYTE_STREAM_SPLIT")},
            write_page_checksum=True, store_schema=True) as writer:
        for table in _tables(run, schema):
            writer.write_table(table, row_group_size=ROWS)
    with temporary.open("rb+") as file:
        os.fsync(file.fileno())
    temporary.replace(path)
    sync_folder(path.parent)
    return path


def main(arguments: list[str]) -> int:
    """Export one run folder; a sentence and code 7 where that fails."""
    if len(arguments) not in (1, 2):
        print("usage: python -m hvhost.record.parquet RUNDIR [FILE]", file=sys.stderr)
        return 2
    try:
        print(export(RunFolder.at(Path(arguments[0])), Path(arguments[1]) if arguments[1:] else None))
    except HvhostError as error:
        print(error, file=sys.stderr)
        return error.exit_code
    except (OSError, pa.ArrowException) as error:
        print(f"{arguments[0]}: the Parquet file could not be written: {error}", file=sys.stderr)
        return 7
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
