"""A run's samples as CSV for spreadsheets: streamed from Parquet, a row group at a time, in bounded memory.

Columns and units are those of the Parquet (FORMAT.md, section 7): the unit stands in the header's names.  Times are
ISO 8601 with the offset of the chosen zone, which changes within a file where summer time begins or ends.  Decimal mark
and separator are chosen; numbers have no grouping, texts hold neither mark nor separator, so nothing is quoted.
"""

from collections.abc import Callable, Iterator
from datetime import datetime, timedelta, tzinfo
from pathlib import Path
from typing import Any, BinaryIO

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
import pyarrow.csv as pc_csv
import pyarrow.parquet as pq

from hvhost.record.csvform import CsvForm, offset_text, zone_of
from hvhost.words.errors import CommandRefused
from hvhost.words.nearest import nearest_word

ROWS = 1 << 16  # rows at a time
NANOS = 1_000_000_000


def write_csv(source: Path, out: BinaryIO, form: CsvForm, columns: tuple[str, ...] = (),
              tell: Callable[[int, int], None] = lambda done, total: None) -> int:
    """Write the samples of a Parquet file; returns the rows.  ``tell(done, total)`` is called as it goes on.

    Raises `CommandRefused` for a column that is not there, ``OSError`` where ``out`` cannot be written.
    """
    with pq.ParquetFile(source) as file:
        names = _chosen(columns, file.schema_arrow.names)
        total, done = file.metadata.num_rows, 0
        zone = zone_of(form.zone)
        out.write((form.separator.join(names) + "\n").encode("ascii"))
        options = pc_csv.WriteOptions(include_header=False, delimiter=form.separator, quoting_style="none")
        with pc_csv.CSVWriter(out, pa.schema([(name, pa.string()) for name in names]), write_options=options) as csv:
            for batch in file.iter_batches(ROWS, columns=list(names)):
                for part in _parts(batch, zone):
                    csv.write(_texts(part, names, form, zone))
                done += batch.num_rows
                tell(done, total)
    return done


def _chosen(columns: tuple[str, ...], known: list[str]) -> tuple[str, ...]:
    for name in columns:
        if name not in known:
            near = nearest_word(name, known)
            raise CommandRefused(f"a column, one of {', '.join(known)}", repr(name)[:60], "--columns",
                                 f"did you mean '{near}'?" if near else "")
    if len(set(columns)) != len(columns):
        raise CommandRefused("each column once", ", ".join(columns), "--columns")
    return columns or tuple(known)


def _parts(batch: Any, zone: tzinfo) -> Iterator[Any]:
    """Yield the batch in parts of one offset each."""
    if "t" not in batch.schema.names or not batch.num_rows:
        yield batch
        return
    nanos = _nanos(batch)
    at = 0
    while at < len(nanos):
        end = _same_offset(nanos, at, zone)
        yield batch.slice(at, end - at)
        at = end


def _nanos(batch: Any) -> Any:
    return batch.column(batch.schema.names.index("t")).cast(pa.int64()).to_numpy(zero_copy_only=False)


def _same_offset(nanos: Any, at: int, zone: tzinfo) -> int:
    """Return the end of the rows from ``at`` on that share its offset (by halving: zones change months apart)."""
    offset, low, high = _offset(nanos[at], zone), at, len(nanos)
    if _offset(nanos[-1], zone) == offset:
        return high
    while high - low > 1:
        middle = (low + high) // 2
        low, high = (middle, high) if _offset(nanos[middle], zone) == offset else (low, middle)
    return high


def _offset(nanos: Any, zone: tzinfo) -> timedelta:
    return datetime.fromtimestamp(int(nanos) // NANOS, zone).utcoffset() or timedelta(0)


def _texts(batch: Any, names: tuple[str, ...], form: CsvForm, zone: tzinfo) -> Any:
    """Return the batch with every column as text."""
    arrays = []
    for name in names:
        column = batch.column(batch.schema.names.index(name))
        if name == "t":
            arrays.append(_times(batch, zone))
        elif pa.types.is_boolean(column.type):
            arrays.append(column.cast(pa.int8()).cast(pa.string()))
        elif pa.types.is_dictionary(column.type):
            arrays.append(column.dictionary_decode().cast(pa.string()))
        else:
            text = column.cast(pa.string())
            floats = pa.types.is_floating(column.type) and form.decimal != "."
            arrays.append(pc.replace_substring(text, ".", form.decimal) if floats else text)
    return pa.record_batch(arrays, names=list(names))


def _times(batch: Any, zone: tzinfo) -> Any:
    nanos = _nanos(batch)
    offset = _offset(nanos[0], zone) if len(nanos) else timedelta(0)
    local = pa.array(nanos + np.int64(offset.total_seconds()) * NANOS, pa.int64()).cast(pa.timestamp("ns"))
    text = pc.replace_substring(local.cast(pa.string()), " ", "T", max_replacements=1)
    return pc.binary_join_element_wise(text, offset_text(offset), "")
