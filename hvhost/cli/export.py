"""``hvhost export RUN``: a run's samples as CSV for spreadsheets or Parquet for programs."""

import argparse
import os
import shutil
import sys
import tempfile
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, BinaryIO

from hvhost.cli import exits
from hvhost.cli.progress import Progress
from hvhost.cli.runs import DEFAULT_ROOT, root_of
from hvhost.record.catalogue import find_run
from hvhost.record.export import export_in_child
from hvhost.record.folder import SAMPLES, RunFolder, folder_fault, sync_folder
from hvhost.record.manifest import as_closed
from hvhost.words.errors import RecordFault, UsageFault

if TYPE_CHECKING:
    from hvhost.record.csvform import CsvForm

ABOUT = """Writes a run's samples, one row a sample, times in the chosen zone with their offset, units in the header's
names, values with the output's sign.  The samples come from the folder's Parquet where that is as it was closed, else
they are made anew from the block file, the original.  FILE '-' is standard output."""
SEPARATOR_WORDS = {"tab": "\t", "comma": ",", "semicolon": ";"}


def run(argv: list[str]) -> int:
    """Write what was asked for; each file whole under its name or not at all."""
    parser = argparse.ArgumentParser(prog="hvhost export", description=ABOUT, epilog=exits.EPILOG)
    parser.add_argument("run", metavar="RUN", help="a run's number, its folder's name, a unique beginning, or 'last'")
    parser.add_argument("--runs", default="", metavar="FOLDER", help=f"the runs folder (default: {DEFAULT_ROOT})")
    parser.add_argument("--csv", default="", metavar="FILE")
    parser.add_argument("--parquet", default="", metavar="FILE")
    parser.add_argument("--decimal", default=".", metavar="MARK", help="'.' or ','")
    parser.add_argument("--separator", default="", metavar="MARK",
                        help="',', ';', '|' or tab (default: ',', with a decimal comma ';')")
    parser.add_argument("--zone", default="UTC", metavar="NAME", help="time zone such as Europe/Berlin (default: UTC)")
    parser.add_argument("--columns", default="", metavar="A,B", help="only these columns, in this order")
    parser.add_argument("--force", action="store_true", help="replace files that are there")
    options = parser.parse_args(argv)
    if not options.csv and not options.parquet:
        raise UsageFault("--csv FILE or --parquet FILE", "neither", "export")
    folder = find_run(root_of(options.runs), options.run)
    for name in (options.csv, options.parquet):
        _check_place(name, folder, force=options.force)
    with samples_of(folder) as source:
        if options.csv:
            _to_csv(source, options)
        if options.parquet:
            _to_parquet(source, options.parquet)
    return exits.PASSED


@contextmanager
def samples_of(folder: RunFolder) -> Iterator[Path]:
    """Yield a Parquet of the run's samples: the closed one where it is as closed, else one made anew."""
    if as_closed(folder, SAMPLES):
        yield folder.path / SAMPLES
        return
    print(f"{folder.name}: no Parquet as it was closed; made anew from the block file", file=sys.stderr)
    with tempfile.TemporaryDirectory(prefix="hvhost-export-") as place:
        made = export_in_child(folder, path=Path(place) / SAMPLES)
        if made.path is None:
            raise RecordFault("samples that can be read", made.fault, str(folder.path))
        yield made.path


def _check_place(name: str, folder: RunFolder, *, force: bool) -> None:
    if name in ("", "-"):
        return
    path = Path(name)
    if path.exists() and not force:
        raise UsageFault("a new file", "one that is there", name, "choose another name, or give --force")
    if path.resolve().parent == folder.path.resolve() or folder.path.resolve() in path.resolve().parents:
        raise UsageFault("a place outside the run's folder", name, "export", "nothing may be added to a closed run")


def _to_csv(source: Path, options: argparse.Namespace) -> None:
    from hvhost.record.csvfile import write_csv

    form = form_of(options)
    columns = tuple(name.strip() for name in options.columns.split(",") if name.strip())
    progress = Progress("export")
    if options.csv == "-":
        write_csv(source, sys.stdout.buffer, form, columns)
        return
    rows = 0

    def fill(out: BinaryIO) -> None:
        nonlocal rows
        rows = write_csv(source, out, form, columns, progress)

    _whole(Path(options.csv), fill)
    progress.clear()
    print(f"{options.csv}: {rows} rows", file=sys.stderr)


def form_of(options: argparse.Namespace) -> "CsvForm":
    """The form that the options ask for."""
    from hvhost.record.csvform import CsvForm

    separator = SEPARATOR_WORDS.get(options.separator, options.separator) or (";" if options.decimal == "," else ",")
    return CsvForm(decimal=options.decimal, separator=separator, zone=options.zone)


def _to_parquet(source: Path, name: str) -> None:
    if name == "-":
        raise UsageFault("a file's name", "'-'", "--parquet")

    def fill(out: BinaryIO) -> None:
        with source.open("rb") as file:
            shutil.copyfileobj(file, out, 1 << 20)

    _whole(Path(name), fill)
    print(f"{name}: {Path(name).stat().st_size} bytes", file=sys.stderr)


def _whole(path: Path, fill: Callable[[BinaryIO], None]) -> None:
    """Write a file beside its place and rename it into it; nothing is left where that fails."""
    temporary = path.with_name(f".{path.name}.{os.getpid()}.tmp")
    try:
        with temporary.open("wb") as out:
            fill(out)
            out.flush()
            os.fsync(out.fileno())
        temporary.replace(path)
        sync_folder(path.parent)
    except OSError as error:
        raise folder_fault(error, path, "file") from None
    finally:
        temporary.unlink(missing_ok=True)
