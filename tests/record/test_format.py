"""FORMAT.md is enough to write a reader: this one was written from the page and imports nothing of the record's own."""

import json
import struct
import zlib
from collections.abc import Iterator
from pathlib import Path
from typing import Any

from hvhost.record.amend import AMENDMENT, FIELDS, INSPECTION, BreakdownKind
from hvhost.record.catalogue import DELIVERED
from hvhost.record.data import load_run
from hvhost.record.meta import PHASES, RunMeta
from hvhost.record.repack import repack
from hvhost.report.row import COLUMNS
from tests.record.making import Case, made_run

PAGE = (Path(__file__).parents[2] / "hvhost" / "record" / "FORMAT.md").read_text("utf-8")


def entries(data: bytes) -> Iterator[tuple[int, int, int, bytes]]:
    """Section 2: (kind, flags, sequence number, payload) of a sound file."""
    at = 0
    while at < len(data):
        magic, kind, flags, _mark, length, seq = struct.unpack_from("<2sBBHII", data, at)
        assert magic == b"\xf5\x9a"
        end = at + 14 + length
        assert struct.unpack_from("<I", data, end)[0] == zlib.crc32(data[at:end])
        yield kind, flags, seq, data[at + 14 : end]
        at = end + 4


def codes(flags: int, payload: bytes) -> tuple[list[int], list[int]]:
    """Sections 3 and 6: the codes of a BLOCK, live or at rest."""
    v_kind, i_kind = "h" if flags & 1 else "H", "h" if flags & 2 else "H"
    if not flags & 8:
        pairs = payload[36]
        flat = struct.unpack("<" + (v_kind + i_kind) * pairs, payload[37:])
        return list(flat[0::2]), list(flat[1::2])
    pairs, v_low, v_bits, i_low, i_bits = struct.unpack_from("<BiBiB", payload, 30)
    bits = "".join(f"{byte:08b}" for byte in payload[41:])
    out = []
    for low, width, start in ((v_low, v_bits, 0), (i_low, i_bits, pairs * v_bits)):
        out.append([low + (int(bits[start + k * width : start + (k + 1) * width], 2) if width else 0)
                    for k in range(pairs)])
    return out[0], out[1]


def read(path: Path) -> tuple[dict[str, Any], list[int], list[int], list[int]]:
    """META, sequence numbers and all codes."""
    meta: dict[str, Any] = {}
    numbers: list[int] = []
    v: list[int] = []
    i: list[int] = []
    for kind, flags, seq, payload in entries(path.read_bytes()):
        numbers.append(seq)
        if kind == 1:
            meta = json.loads(zlib.decompress(payload) if flags & 8 else payload)
        elif kind == 2:
            more_v, more_i = codes(flags, payload)
            v += more_v
            i += more_i
    return meta, numbers, v, i


def test_a_stranger_s_reader_gives_the_same_samples_live_and_at_rest(tmp_path: Path) -> None:
    """Written from the page alone, it reads META and every code as the program does."""
    folder = made_run(tmp_path, Case(hold_s=0.5))
    live = read(folder.blocks)
    run = load_run(folder)
    assert live[1] == list(range(len(live[1])))
    assert (live[2], live[3]) == (run.v_code.tolist(), run.i_code.tolist())
    assert live[0]["run"] == "0007"
    repack(folder.blocks)
    assert read(folder.blocks) == live


def test_the_page_names_every_key_of_meta_and_every_phase() -> None:
    """No key of META and no phase of a step is left out of the page."""
    for name in (*RunMeta.__dataclass_fields__, *PHASES):
        assert f"`{name}`" in PAGE, name


def test_the_page_names_every_field_that_may_be_corrected_every_kind_and_every_column() -> None:
    """The closed lists of sections 8 and 9 are the program's."""
    for name in (*FIELDS, *BreakdownKind, AMENDMENT, INSPECTION, DELIVERED, *COLUMNS):
        assert f"`{name}`" in PAGE, name
