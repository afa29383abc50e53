"""The section ``daemon:``: its default, its bounds, its unit."""

from pathlib import Path

import pytest

from hvhost.bench.file import bench_from, check_text
from hvhost.bench.service import DISK_FLOOR_B, DaemonBlock, service_of

DEMO = (Path(__file__).parents[2] / "configs" / "demo.bench.yaml").read_text(encoding="utf-8")


def test_a_file_without_the_section_gets_the_default() -> None:
    """500 MB, stated once."""
    assert bench_from("b.yaml", DEMO).service.disk_floor_b == DISK_FLOOR_B == 500e6
    assert service_of(None) == service_of(DaemonBlock())


@pytest.mark.parametrize(("text", "size_b"), [("2 GB", 2e9), ("750 MB", 750e6), ("1e6 B", 1e6)])
def test_a_size_is_read_with_its_unit(text: str, size_b: float) -> None:
    """Decimal prefixes, as IEC 80000-13 has them for the byte."""
    assert bench_from("b.yaml", f"{DEMO}daemon:\n  disk_floor: {text}\n").service.disk_floor_b == size_b


@pytest.mark.parametrize(("text", "expected"), [
    ("2 Gb", "a size such as '2 GB'"), ("500", "a size such as '2 GB'"), ("1 GiB", "a size such as '2 GB'"),
    ("10 kB", "at least 1 MB"), ("-1 GB", "at least 1 MB")])
def test_another_unit_or_too_little_is_refused(text: str, expected: str) -> None:
    """Bits, binary prefixes, bare numbers and floors that protect nothing are faults with their line."""
    findings = check_text("b.yaml", f"{DEMO}daemon:\n  disk_floor: {text}\n")
    (found,) = [f for f in findings if f.what == "daemon.disk_floor"]
    assert found.expected == expected
    assert found.line == DEMO.count("\n") + 2
