"""The snapshot: full rate around the trigger, kept until stored, and every loss told."""

from hvhost.wire.frames import Ok, unpack_codes
from tests.standin.fakes import SETTINGS, Bench


def fetch(bench: Bench) -> list[int]:
    """All codes of the waiting snapshot, by its parts."""
    codes: list[int] = []
    total = 1
    while len(codes) // 2 < total:
        answer = bench.ask("snap", str(len(codes) // 2))
        assert isinstance(answer, Ok)
        total, pairs = int(answer.words[4]), int(answer.words[8])
        codes += unpack_codes(answer.words[9].encode(), "ss", pairs)
    return codes


def tripped(**config: int) -> Bench:
    bench = Bench(**config).energised()
    bench.board.i = 25_000
    bench.pass_ms(2)
    bench.board.i = None
    return bench


def test_it_holds_the_samples_before_and_after_the_trigger():
    """64 pairs up to and including the trigger, 64 behind, indices without a gap (PROTOCOL 13.1, 13.3)."""
    bench = tripped()
    trigger = bench.mcu.core.index
    assert bench.code("snap", "0") == "nothing"  # still collecting
    bench.pass_ms(70)
    number = bench.event("snapshot").a
    assert bench.event("snapshot").b == 128
    words = bench.ask("snap", "0").words
    assert words[:2] == (str(number), "trip")
    assert words[2] == "ABCD1234"
    assert int(words[5]) == 63
    assert int(words[6]) + int(words[5]) == trigger
    assert words[7] == "0"
    codes = fetch(bench)
    assert len(codes) == 256
    assert codes[2 * 63 + 1] == 25_000
    assert codes[2 * 61 + 1] == 0
    assert bench.code("snap", "128") == "nothing"


def test_it_is_kept_until_a_session_has_stored_it():
    """Through lost links and new sessions, until `stored` names it (PROTOCOL 13.2, 13.6)."""
    bench = tripped()
    bench.pass_ms(100)
    number = bench.event("snapshot").a
    before = fetch(bench)
    bench.hello(session=3)
    assert bench.ask("info", "3").pairs["snap"] == str(number)
    assert fetch(bench) == before
    assert bench.code("stored", str(number + 1)) == "nothing"
    assert bench.code("stored", str(number)) == ""
    assert bench.code("stored", str(number)) == "nothing"
    assert bench.ask("info", "3").pairs["snap"] == "0"


def arc(bench: Bench) -> None:
    """An arc that pauses."""
    bench.board.level = 0.0
    bench.board.v = 0
    bench.pass_ms(3)
    bench.board.v = None


def test_a_latching_cause_overwrites_an_unconfirmed_arcs_and_says_so():
    """The trip's evidence is worth more (PROTOCOL 13.4)."""
    bench = Bench().energised(pause=(3, 300, 10_000))
    arc(bench)
    bench.pass_ms(100)
    first = bench.event("snapshot").a
    bench.cut(rule=4)
    assert (bench.event("lost").a, bench.event("lost").b) == (first, 1)
    bench.pass_ms(100)
    words = bench.ask("snap", "0").words
    assert words[1] == "trip"
    assert words[7] == "1"


def test_an_arc_overwrites_nothing():
    """A second arc's snapshot is not taken while the first waits, and that is said (PROTOCOL 13.4)."""
    bench = Bench().energised(pause=(3, 300, 10_000))
    arc(bench)
    bench.pass_ms(400)
    first = bench.event("snapshot").a
    assert bench.seg(20_000, arc=1) == ""
    bench.pass_ms(1_200)
    arc(bench)
    assert bench.event("lost").b == 2
    assert bench.event("lost").a != first
    words = bench.ask("snap", "0").words
    assert (int(words[0]), words[1], words[7]) == (first, "arc", "2")


def test_an_arc_that_latches_while_its_snapshot_collects_is_one_snapshot():
    """The same evidence is not counted as lost: its kind becomes `trip`."""
    bench = Bench(SETTINGS.with_(arctotal=0)).energised(pause=(3, 300, 10_000))
    arc(bench)
    bench.pass_ms(100)
    assert bench.ask("snap", "0").words[1] == "trip"
    assert "lost" not in bench.kinds()


def test_one_lost_by_a_reset_is_reported_as_lost():
    """It lived in memory; after the boot the event says that it is gone (PROTOCOL 13.5)."""
    bench = tripped()
    bench.pass_ms(100)
    number = bench.event("snapshot").a
    bench.mcu.reset(1)
    bench.collect()
    assert (bench.event("lost").a, bench.event("lost").b) == (number, 3)
    bench.mcu.reset(1)
    bench.collect()
    assert bench.kinds().count("lost") == 1


def test_a_missed_conversion_ends_it_so_that_no_index_is_skipped():
    """Pairs of a snapshot are consecutive or absent."""
    bench = tripped()
    bench.pass_ms(20)
    bench.mcu.miss = 1
    bench.pass_ms(2)
    assert bench.event("snapshot").b == 64 + 20
    assert len(fetch(bench)) == 2 * 84
