"""The closed vocabularies: one word, one number."""

from hvhost.wire.vocabulary import (
    CAUSE_WORDS,
    ERR_NUMBERS,
    HOST_RULE_WORDS,
    Cause,
    Err,
    EventKind,
    HostRule,
    Inputs,
    cause_words,
)


def test_each_cause_and_rule_has_one_word() -> None:
    """Causes and host rules have words, no two the same."""
    assert set(CAUSE_WORDS) == set(Cause)
    assert len(set(CAUSE_WORDS.values())) == len(Cause)
    assert set(HOST_RULE_WORDS) == set(HostRule)


def test_causes_are_told_lowest_bit_first() -> None:
    """A set of causes reads in the order of its bits, unknown bits left out."""
    assert cause_words(int(Cause.RESTARTED | Cause.OVERCURRENT) | 1 << 31) == ("overcurrent", "restarted")
    assert cause_words(0) == ()


def test_error_codes_are_numbered_from_one() -> None:
    """The event of a refused arm carries these numbers."""
    assert list(ERR_NUMBERS.values()) == list(range(1, len(Err) + 1))


def test_masks_are_single_bits_and_words_fit_the_grammar() -> None:
    """Bits do not overlap, and every word can stand on the wire."""
    for mask in (Inputs, Cause):
        assert all(int(bit).bit_count() == 1 for bit in mask)
    for word in (*Err, *EventKind):
        assert word.isalpha()
        assert word.islower()
        assert len(word) <= 16
