"""The section of the instrument socket: off where missing, this machine alone where it says nothing else."""

import pytest

from hvhost.bench.file import bench_from, check_text
from hvhost.bench.instrument import ALLOW_MAX, Instrument, check_instrument, instrument_of, place_of
from hvhost.words.findings import Grade
from tests.bench.changes import DEMO, changed, findings


def _instrument(*changes: str) -> Instrument:
    made = bench_from("b.yaml", changed(*changes)).instrument
    assert made is not None
    return made


def test_a_bench_file_without_the_section_has_no_instrument_socket() -> None:
    """Off unless the bench file says otherwise."""
    assert bench_from("b.yaml", DEMO).instrument is None
    assert instrument_of(None) is None


def test_the_empty_section_listens_on_this_machine_alone() -> None:
    """The default is loopback, on the port that IANA keeps for SCPI."""
    assert _instrument("instrument={}") == Instrument(host="127.0.0.1", port=5025)
    assert findings("instrument={}") == ()


def test_an_address_of_the_sixth_version_stands_in_brackets() -> None:
    """The text is split at the bracket, not at a colon inside it."""
    assert place_of("[::1]:5025") == ("::1", 5025)
    assert _instrument("instrument.listen='[::1]:5025'").host == "::1"


@pytest.mark.parametrize(("peer", "admitted"), [
    ("192.0.2.7", True), ("192.0.2.8", False), ("198.51.100.200", True), ("198.51.101.1", False),
    ("::ffff:192.0.2.7", True), ("::ffff:192.0.2.8", False), ("127.0.0.1", True), ("::1", True),
    ("2001:db8::1", False), ("fe80::1%eth0", False), ("", False), ("nonsense", False)])
def test_only_listed_addresses_are_admitted(peer: str, admitted: bool) -> None:
    """Beyond loopback nobody is served but the addresses and networks listed, however the kernel writes them."""
    made = _instrument("instrument.listen=192.0.2.1:5025", "instrument.allow=[192.0.2.7, 198.51.100.0/24]")
    assert made.admits(peer) is admitted


def test_without_a_list_whoever_reaches_it_is_served() -> None:
    """On loopback the machine's own users need no list."""
    assert Instrument(host="127.0.0.1", port=5025).admits("127.0.0.1")


def test_a_network_wider_than_a_site_is_no_list() -> None:
    """A list that admits everybody is refused at its own line; the widest network of a site is taken."""
    wide = findings("instrument.listen=192.0.2.1:5025", "instrument.allow=['::/0']")
    assert [(f.grade, f.what) for f in wide] == [(Grade.REFUSE, "instrument.allow.1")]
    fine = findings("instrument.listen=192.0.2.1:5025", "instrument.allow=[10.1.0.0/16]")
    assert [f.grade for f in fine] == [Grade.NOTE]


def test_the_list_is_bounded() -> None:
    """A list that long is a mistake."""
    many = ", ".join(f"192.0.2.{n}" for n in range(ALLOW_MAX + 1))
    told = check_text("b.yaml", changed("instrument.listen=192.0.2.1:5025", f"instrument.allow=[{many}]"))
    assert [f.what for f in told if f.grade is Grade.REFUSE] == ["instrument.allow"]
    assert check_instrument.__doc__
