"""Faults by name: what is written, when it comes, and what the wire's faults do to bytes."""

import math
import re

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.standin import faults
from hvhost.standin.faults import FAULTS, FaultBook, Place, WireFaults, fault_lines, parse_fault
from hvhost.words.errors import UsageFault


@pytest.mark.parametrize(("text", "value", "at_s", "at_v", "for_s"), [
    ("lead-off", 1.0, 0.0, 0.0, math.inf), ("v-offset=200", 200.0, 0.0, 0.0, math.inf),
    ("v-offset=-3", -3.0, 0.0, 0.0, math.inf), ("lead-off@12.5s", 1.0, 12.5, 0.0, math.inf),
    ("arc@8kV", 1.0, 0.0, 8e3, math.inf), ("panel-v=5 kV@3 s", 5e3, 3.0, 0.0, math.inf),
    ("mains-lost@12.5s+300ms", 1.0, 12.5, 0.0, 0.3), ("leak=2 MΩ@8kV+2s", 2e6, 0.0, 8e3, 2.0)])
def test_fault_is_read(text: str, value: float, at_s: float, at_v: float, for_s: float) -> None:
    """Name, value, when and how long, in any combination."""
    spec = parse_fault(text)
    assert (spec.value, spec.at_s, spec.at_v, spec.for_s) == (value, at_s, at_v, for_s)


@pytest.mark.parametrize(("text", "hint"), [
    ("lead-of", "nearest: lead-off"), ("panel-v=5", "voltage"), ("panel-v=5 KV", "5 kV"), ("arc@8", "duration"),
    ("arc@8 V V", "voltage"), ("", "a fault such as"), ("Arc", "a fault such as"), ("v-offset=", "a fault such as"),
    ("v-offset=1e999", "number"), ("arc+", "a fault such as"), ("v-offset=nan", "number")])
def test_wrong_fault_is_refused_with_what_was_expected(text: str, hint: str) -> None:
    """The message names what should stand there."""
    with pytest.raises(UsageFault) as refused:
        parse_fault(text)
    assert hint in str(refused.value)


def test_every_fault_is_zero_by_default() -> None:
    """A book without specs has nothing on and nothing to come."""
    book = FaultBook()
    assert book.active == {}
    assert book.next_s == book.next_v == math.inf


def test_every_fault_has_one_line() -> None:
    """The help page has one short line per fault."""
    lines = fault_lines()
    assert len(lines) == len(FAULTS)
    assert all(len(line) <= 118 and "\n" not in line for line in lines)
    assert all(re.fullmatch(r"[a-z]+(-[a-z]+)*", name) for name in FAULTS)


def test_file_opens_with_what_must_be_survived() -> None:
    """The list of faults to survive stands first, and every place has faults."""
    assert (faults.__doc__ or "").startswith("Faults by name, none on by default.\n\nWhat must be survived")
    assert {fault.place for fault in FAULTS.values()} == set(Place)


def test_fault_comes_and_goes_by_time() -> None:
    """`@12.5s+0.3s` is on from 12.5 s to 12.8 s."""
    book = FaultBook(["mains-lost@12.5s+0.3s"])
    assert book.next_s == 12.5
    book.step(12.4, 0.0)
    assert "mains-lost" not in book.active
    book.step(12.5, 0.0)
    assert "mains-lost" in book.active
    assert book.next_s == pytest.approx(12.8)
    book.step(12.8, 0.0)
    assert book.active == {}
    assert book.next_s == math.inf


def test_fault_by_voltage_waits_for_it() -> None:
    """`@8kV` looks at the true voltage, once."""
    book = FaultBook(["divider-open@8kV"])
    book.step(100.0, 7.9e3)
    assert book.active == {}
    book.step(101.0, 8e3)
    assert book.active == {"divider-open": 1.0}
    assert book.next_v == math.inf


def test_switching_off_counts_as_a_change() -> None:
    """Owners look again when the version moved."""
    book = FaultBook()
    book.on("lead-off")
    version = book.version
    book.off("lead-off")
    book.off("lead-off")
    assert book.version == version + 1


def test_once_is_taken_once() -> None:
    """A fault that happens once is gone when its owner took it."""
    book = FaultBook()
    book.on("mcu-reset")
    assert book.take("mcu-reset") == 1.0
    assert book.take("mcu-reset") is None


def test_unknown_fault_is_not_switched_on() -> None:
    """A name outside the list is refused and nothing changes."""
    book = FaultBook()
    with pytest.raises(UsageFault):
        book.on("gremlin")
    assert book.active == {}


@given(st.binary(max_size=200))
def test_clean_wire_passes_the_same_object(data: bytes) -> None:
    """Without a wire fault no byte is copied or changed."""
    wire = WireFaults(FaultBook(["lead-off"]), 1)
    assert wire.to_host(data) is data
    assert wire.to_mcu(data) is data


def spoilt(spec: str, data: bytes, seed: int = 1) -> bytes:
    """What arrives at the host with this fault on."""
    book = FaultBook([spec])
    book.step(0.0, 0.0)
    return WireFaults(book, seed).to_host(data)


DATA = bytes(range(256)) * 40


def test_lost_bytes_are_missing_in_about_their_share() -> None:
    """One per cent lost of 10,240 bytes is about a hundred."""
    assert 60 < len(DATA) - len(spoilt("byte-lost=0.01", DATA)) < 150


def test_flipped_bytes_differ_by_one_bit() -> None:
    """Length stays, and each wrong byte differs in exactly one bit."""
    out = spoilt("byte-flipped=0.01", DATA)
    wrong = [a ^ b for a, b in zip(out, DATA, strict=True) if a != b]
    assert 60 < len(wrong) < 150
    assert all(bits.bit_count() == 1 for bits in wrong)


@pytest.mark.parametrize("spec", ["byte-doubled=0.01", "line-noise=0.01"])
def test_added_bytes_lengthen(spec: str) -> None:
    """Doubled bytes and noise add about their share."""
    assert 60 < len(spoilt(spec, DATA)) - len(DATA) < 150


def test_swapped_bytes_keep_their_count() -> None:
    """Swapping changes the order only."""
    out = spoilt("byte-swapped=0.05", DATA)
    assert sorted(out) == sorted(DATA)
    assert out != DATA


def test_a_whole_chunk_comes_twice() -> None:
    """A chunk doubled is the same chunk again."""
    assert spoilt("line-doubled=1", b"abc\n") == b"abc\nabc\n"


def test_mute_and_deaf_are_silent_one_way_each() -> None:
    """Each direction can be cut alone."""
    book = FaultBook(["mute"])
    book.step(0.0, 0.0)
    wire = WireFaults(book, 1)
    assert (wire.to_host(b"x"), wire.to_mcu(b"y")) == (b"", b"y")
    book.off("mute")
    book.on("deaf")
    assert (wire.to_host(b"x"), wire.to_mcu(b"y")) == (b"x", b"")


def test_echo_brings_the_hosts_bytes_back() -> None:
    """What the host sends is heard by both ends."""
    book = FaultBook(["echo"])
    book.step(0.0, 0.0)
    wire = WireFaults(book, 1)
    assert wire.to_mcu(b"cut") == b"cut"
    assert wire.to_host(b"ok") == b"okcut"
    assert wire.to_host(b"ok") == b"ok"


def test_same_seed_spoils_the_same_bytes() -> None:
    """Noise on the wire repeats with the seed."""
    assert spoilt("byte-flipped=0.05", DATA, 5) == spoilt("byte-flipped=0.05", DATA, 5)
    assert spoilt("byte-flipped=0.05", DATA, 5) != spoilt("byte-flipped=0.05", DATA, 6)
