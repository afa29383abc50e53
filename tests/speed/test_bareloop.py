"""The bare loop beside a loaded daemon."""

from hvhost.speed.bareloop import BareLoop


def test_it_beats_until_it_is_ended_and_tells_two_figures() -> None:
    """The longest lateness is not below the tail's."""
    found = BareLoop().end()
    assert set(found) == {"longest_s", "p999_s", "swelling"}
    assert found["swelling"] >= 0.8  # of a bucket's upper edge
    assert 0.0 <= found["p999_s"] <= found["longest_s"]
