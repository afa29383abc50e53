"""Orientation and sample blocks."""

from dataclasses import dataclass, replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.bench.file import load_bench
from hvhost.guard.limits import orientation_of
from hvhost.samples.assembler import Assembler
from hvhost.samples.blocks import Orientation, raw_limits
from tests.samples.build import CONFIGS, PLAIN, wire


@dataclass
class Info:
    """A greeting's converter page."""

    signs: str
    v_bits: int
    i_bits: int


@pytest.mark.parametrize(("sign", "bits", "ends"), [
    ("s", 16, (-32768, 32767)), ("u", 16, (0, 65535)), ("u", 12, (0, 4095)), ("s", 12, (-2048, 2047))])
def test_converters_end_where_their_bits_end(sign: str, bits: int, ends: tuple[int, int]) -> None:
    """Two's complement and straight binary ranges of n bits (common practice of converters' data sheets)."""
    assert raw_limits(sign, bits) == ends


@pytest.mark.parametrize("name", ["demo", "small"])
def test_orientation_from_settings_is_the_bench_files(name: str) -> None:
    """The settings that a bench file asks for orient codes as the bench file itself does."""
    bench = load_bench(CONFIGS / f"{name}.bench.yaml")
    settings = bench.settings()
    info = Info("".join("s" if c.signed else "u" for c in (bench.voltage, bench.current)), *(
        (c.monitor.code_high - c.monitor.code_low + 1).bit_length() - 1 for c in (bench.voltage, bench.current)))
    assert Orientation.of(settings, info) == orientation_of(bench)


@given(st.sampled_from([1, -1]), st.integers(-3000, 3000), st.integers(-32768, 32767))
def test_bounds_in_raw_codes_say_what_they_say_in_oriented_ones(sign: int, zero: int, raw: int) -> None:
    """A raw code is reversed exactly where its oriented code lies below minus the zero band."""
    orientation = Orientation(v_sign=sign, v_zero=zero, i_sign=1, i_zero=0, v_limits=(-32768, 32767),
                              i_limits=(0, 65535), v_band=40, i_band=40)
    low, high, reversed_low, reversed_high = orientation.raw_bounds(voltage=True)
    oriented = sign * (raw - zero)
    assert (raw < reversed_low or raw > reversed_high) is (oriented < -40)
    floor, ceiling = orientation.oriented_limits(voltage=True)
    assert (raw <= low or raw >= high) is (oriented <= floor or oriented >= ceiling)


def test_a_converters_end_inside_the_zero_band_is_no_limit() -> None:
    """A unipolar chain reads zero at code 0: that is not a converter at its limit, its top code is."""
    orientation = Orientation(v_sign=1, v_zero=5, i_sign=-1, i_zero=4090, v_limits=(0, 4095), i_limits=(0, 4095),
                              v_band=20, i_band=20)
    assert orientation.raw_bounds(voltage=True)[:2] == (-1, 4095)
    assert orientation.raw_bounds(voltage=False)[:2] == (0, 4096)


def test_a_block_knows_its_last_sample() -> None:
    """Pairs, last index and last tick follow from the first."""
    block = Assembler(PLAIN, 10_000, 10).take(wire(7), 0.0)
    assert block is not None
    assert (block.pairs, block.last_index, block.last_tick) == (8, 14, 140)


@given(st.sampled_from([1, -1]), st.integers(-300, 300), st.lists(st.integers(-3000, 3000), min_size=2, max_size=8))
def test_the_extremes_are_those_of_the_codes_and_of_no_other_block(sign: int, zero: int, raw: list[int]) -> None:
    """Whatever the polarity, they are least and greatest; a block with other codes looks for its own."""
    orientation = replace(PLAIN, v_sign=sign, v_zero=zero, i_sign=-sign)
    block = Assembler(orientation, 10_000, 10).take(wire(0, raw[: len(raw) // 2 * 2]), 0.0)
    assert block is not None
    assert block.extremes == (min(block.v), max(block.v), min(block.i), max(block.i))
    assert replace(block, v=(7, 8)).extremes[:2] == (7, 8)
